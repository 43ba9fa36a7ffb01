import { blankMask, maskArea, maskDifference, maskIou, type Mask } from "./mask";

/** Thickness of the band for an image of this size, px: 2 % of the diagonal, at least 1 (Cheng et al., 2021). */
export function boundaryThickness(width: number, height: number, ratio = 0.02): number {
  return Math.max(1, Math.round(ratio * Math.hypot(width, height)));
}

/**
 * Pixels of the mask within `thicknessPx` of the outside: the mask less its erosion by a square of 2 * thickness + 1.
 * What lies beyond the image counts as outside. O(words * log thickness).
 */
export function boundaryBand(mask: Mask, thicknessPx: number): Mask {
  return maskDifference(mask, erode(mask, thicknessPx));
}

/**
 * Boundary IoU of two masks of one image, 0..1: IoU of the bands along both outlines, which does not let the inside
 * of a large object hide a poor outline. Source: Cheng, Girshick, Dollár, Berg, Kirillov, CVPR 2021.
 */
export function boundaryIou(a: Mask, b: Mask, thicknessPx: number): number {
  if (maskArea(a) === 0 || maskArea(b) === 0) return 0;
  return maskIou(boundaryBand(a, thicknessPx), boundaryBand(b, thicknessPx));
}

/** The pixels whose square neighbourhood of `radius` px to all sides lies in the mask. */
export function erode(mask: Mask, radius: number): Mask {
  const { stride, height } = mask;
  const across = windowed(mask.words, radius, (words, by) => shiftedColumns(words, by, stride, height));
  const both = windowed(across, radius, (words, by) => shiftedRows(words, by, stride));
  // The windows began at the pixel; moving the result by the radius centres them.
  const centred = shiftedRows(shiftedColumns(both, -radius, stride, height), -radius, stride);
  const eroded = blankMask(mask.x, mask.y, mask.width, mask.height);
  eroded.words.set(centred);
  return eroded;
}

/** AND over the window of 2 * radius + 1 places that starts at each pixel, by doubling. */
function windowed(
  words: Uint32Array,
  radius: number,
  shift: (words: Uint32Array, by: number) => Uint32Array,
): Uint32Array {
  const length = 2 * radius + 1;
  let result = words;
  for (let reach = 1; reach < length;) {
    const step = Math.min(reach, length - reach);
    const moved = shift(result, step);
    result = result.map((word, i) => word & moved[i]!);
    reach += step;
  }
  return result;
}

/** Word i of the result holds the pixels `by` columns further right; pixels from beyond the row are 0. */
function shiftedColumns(words: Uint32Array, by: number, stride: number, height: number): Uint32Array {
  const moved = new Uint32Array(words.length);
  const wordShift = by >> 5;
  const bitShift = by & 31;
  const at = (row: number, word: number) => (word >= 0 && word < stride ? words[row * stride + word]! : 0);
  for (let row = 0; row < height; row++) {
    for (let word = 0; word < stride; word++) {
      const low = at(row, word + wordShift) >>> bitShift;
      const high = bitShift === 0 ? 0 : at(row, word + wordShift + 1) << (32 - bitShift);
      moved[row * stride + word] = low | high;
    }
  }
  return moved;
}

/** Row r of the result is the row `by` further down; rows beyond are 0. */
function shiftedRows(words: Uint32Array, by: number, stride: number): Uint32Array {
  const moved = new Uint32Array(words.length);
  const offset = Math.abs(by) * stride;
  if (offset >= words.length) return moved;
  if (by >= 0) moved.set(words.subarray(offset));
  else moved.set(words.subarray(0, words.length - offset), offset);
  return moved;
}
