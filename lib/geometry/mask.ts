import { prepareShape, type Region } from "./region";
import type { Box, Rings, Shape } from "./types";
import { prepareRings } from "./region";

/**
 * A set of pixels, kept as bits inside its own box (whole px, may not reach outside the image). Row r starts at word
 * r * stride; column c of the image is bit c & 31 of word (c >> 5) - (x >> 5) of its row. Words therefore
 * lie on one grid for all masks of an image, and two masks are compared word by word without shifting.
 * Bits outside the box are 0. An empty mask has width 0 and height 0.
 */
export type Mask = {
  readonly x: number;
  readonly y: number;
  readonly width: number;
  readonly height: number;
  /** Words in a row. */
  readonly stride: number;
  readonly words: Uint32Array;
};

const EMPTY: Mask = { x: 0, y: 0, width: 0, height: 0, stride: 0, words: new Uint32Array(0) };

/** A mask without pixels over this box of whole px. */
export function blankMask(x: number, y: number, width: number, height: number): Mask {
  if (width <= 0 || height <= 0) return EMPTY;
  const stride = ((x + width - 1) >> 5) - (x >> 5) + 1;
  return { x, y, width, height, stride, words: new Uint32Array(stride * height) };
}

/**
 * The pixels of an image of width x height whose centres lie in the shape (even-odd; a centre on the outline belongs to
 * the region on its right and below it, so neighbours that share an edge share no pixel). O(rows * edges side by side).
 */
export function rasteriseShape(shape: Shape, width: number, height: number): Mask {
  return rasteriseRegion(prepareShape(shape), width, height);
}

/** `rasteriseShape` for rings. */
export function rasteriseRings(rings: Rings, width: number, height: number): Mask {
  return rasteriseRegion(prepareRings(rings), width, height);
}

/** `rasteriseShape` for a region that is prepared already. */
export function rasteriseRegion(region: Region, width: number, height: number): Mask {
  const { edges, edgeCount, box } = region;
  if (edgeCount === 0) return EMPTY;
  const left = Math.max(0, Math.ceil(box[0] - 0.5));
  const right = Math.min(width, Math.ceil(box[0] + box[2] - 0.5));
  const top = Math.max(0, Math.ceil(box[1] - 0.5));
  const bottom = Math.min(height, Math.ceil(box[1] + box[3] - 0.5));
  const mask = blankMask(left, top, right - left, bottom - top);
  const active: number[] = [];
  const crossings: number[] = [];
  let next = 0;
  for (let row = top; row < bottom && mask.width > 0; row++) {
    const y = row + 0.5;
    while (next < edgeCount && edges[next * 5]! <= y) active.push(next++ * 5);
    let kept = 0;
    crossings.length = 0;
    for (const at of active) {
      if (edges[at + 1]! <= y) continue;
      active[kept++] = at;
      crossings.push(edges[at + 2]! + (y - edges[at]!) * edges[at + 4]!);
    }
    active.length = kept;
    if (kept > 2) crossings.sort((p, q) => p - q);
    else if (kept === 2 && crossings[0]! > crossings[1]!) crossings.reverse();
    for (let i = 0; i + 1 < kept; i += 2) {
      const from = Math.max(left, Math.ceil(crossings[i]! - 0.5));
      const to = Math.min(right, Math.ceil(crossings[i + 1]! - 0.5));
      if (to > from) fillSpan(mask, row, from, to);
    }
  }
  return mask;
}

/** Sets the pixels from <= x < to of an image row; all must lie inside the mask's box. */
export function fillSpan(mask: Mask, row: number, from: number, to: number): void {
  const start = (row - mask.y) * mask.stride - (mask.x >> 5);
  const firstWord = start + (from >> 5);
  const lastWord = start + ((to - 1) >> 5);
  const firstBits = -1 << (from & 31);
  const lastBits = -1 >>> (31 - ((to - 1) & 31));
  const { words } = mask;
  if (firstWord === lastWord) {
    words[firstWord]! |= firstBits & lastBits;
    return;
  }
  words[firstWord]! |= firstBits;
  words.fill(0xffffffff, firstWord + 1, lastWord);
  words[lastWord]! |= lastBits;
}

/** Whether the mask holds the pixel in this column and row of the image. */
export function maskHas(mask: Mask, column: number, row: number): boolean {
  const { x, y, width, height, stride, words } = mask;
  if (column < x || row < y || column >= x + width || row >= y + height) return false;
  return ((words[(row - y) * stride + (column >> 5) - (x >> 5)]! >>> (column & 31)) & 1) === 1;
}

function bitCount(word: number): number {
  let bits = word - ((word >>> 1) & 0x55555555);
  bits = (bits & 0x33333333) + ((bits >>> 2) & 0x33333333);
  return Math.imul((bits + (bits >>> 4)) & 0x0f0f0f0f, 0x01010101) >>> 24;
}

/** Number of pixels. */
export function maskArea(mask: Mask): number {
  const { words } = mask;
  let pixels = 0;
  for (let i = 0; i < words.length; i++) pixels += bitCount(words[i]!);
  return pixels;
}

/** Number of pixels that both masks hold. O(words of the common box). */
export function maskIntersectionArea(a: Mask, b: Mask): number {
  const top = Math.max(a.y, b.y);
  const bottom = Math.min(a.y + a.height, b.y + b.height);
  const left = Math.max(a.x, b.x) >> 5;
  const right = (Math.min(a.x + a.width, b.x + b.width) - 1) >> 5;
  let pixels = 0;
  for (let row = top; row < bottom; row++) {
    let i = (row - a.y) * a.stride + left - (a.x >> 5);
    let j = (row - b.y) * b.stride + left - (b.x >> 5);
    for (let word = left; word <= right; word++) {
      const common = a.words[i++]! & b.words[j++]!;
      if (common !== 0) pixels += bitCount(common);
    }
  }
  return pixels;
}

/** Intersection over union of two masks of one image, 0..1; 0 where either is empty. */
export function maskIou(a: Mask, b: Mask): number {
  const common = maskIntersectionArea(a, b);
  return common === 0 ? 0 : common / (maskArea(a) + maskArea(b) - common);
}

/** The pixels that satisfy a bitwise rule of two masks, in the given box (which must hold them all). */
function combine(a: Mask, b: Mask, box: Box, rule: (p: number, q: number) => number): Mask {
  const mask = blankMask(...box);
  for (let row = mask.y; row < mask.y + mask.height; row++) {
    for (let word = 0; word < mask.stride; word++) {
      const column = (mask.x >> 5) + word;
      mask.words[(row - mask.y) * mask.stride + word] = rule(wordAt(a, column, row), wordAt(b, column, row));
    }
  }
  return mask;
}

function wordAt(mask: Mask, wordColumn: number, row: number): number {
  const word = wordColumn - (mask.x >> 5);
  if (word < 0 || word >= mask.stride || row < mask.y || row >= mask.y + mask.height) return 0;
  return mask.words[(row - mask.y) * mask.stride + word]!;
}

/** The pixels of either mask. */
export function maskUnion(a: Mask, b: Mask): Mask {
  if (a.width === 0) return b;
  if (b.width === 0) return a;
  const left = Math.min(a.x, b.x);
  const top = Math.min(a.y, b.y);
  const right = Math.max(a.x + a.width, b.x + b.width);
  const bottom = Math.max(a.y + a.height, b.y + b.height);
  return combine(a, b, [left, top, right - left, bottom - top], (p, q) => p | q);
}

/** The pixels of both masks. */
export function maskIntersection(a: Mask, b: Mask): Mask {
  const left = Math.max(a.x, b.x);
  const top = Math.max(a.y, b.y);
  const right = Math.min(a.x + a.width, b.x + b.width);
  const bottom = Math.min(a.y + a.height, b.y + b.height);
  return combine(a, b, [left, top, right - left, bottom - top], (p, q) => p & q);
}

/** The pixels of `a` that `b` does not hold. */
export function maskDifference(a: Mask, b: Mask): Mask {
  return combine(a, b, [a.x, a.y, a.width, a.height], (p, q) => p & ~q);
}

/** The smallest box of whole px around the pixels; [0, 0, 0, 0] for none. */
export function maskBounds(mask: Mask): Box {
  let left = Infinity;
  let right = -1;
  let top = Infinity;
  let bottom = -1;
  for (let row = 0; row < mask.height; row++) {
    for (let word = 0; word < mask.stride; word++) {
      const bits = mask.words[row * mask.stride + word]!;
      if (bits === 0) continue;
      const column = ((mask.x >> 5) + word) << 5;
      left = Math.min(left, column + 31 - Math.clz32(bits & -bits));
      right = Math.max(right, column + 31 - Math.clz32(bits));
      top = Math.min(top, row);
      bottom = row;
    }
  }
  return right < 0 ? [0, 0, 0, 0] : [left, mask.y + top, right - left + 1, bottom - top + 1];
}

/** The same pixels in the smallest box. */
export function trimMask(mask: Mask): Mask {
  const box = maskBounds(mask);
  return combine(mask, mask, box, (p) => p);
}

/** A mask from one byte a pixel, row by row, nonzero for inside. */
export function maskFromBytes(bytes: Uint8Array, width: number, height: number): Mask {
  const mask = blankMask(0, 0, width, height);
  for (let row = 0; row < height; row++) {
    for (let column = 0; column < width; column++) {
      if (bytes[row * width + column]! !== 0)
        mask.words[row * mask.stride + (column >> 5)]! |= 1 << (column & 31);
    }
  }
  return trimMask(mask);
}

/** One byte a pixel of the whole image, row by row, 1 for inside. */
export function maskToBytes(mask: Mask, width: number, height: number): Uint8Array {
  const bytes = new Uint8Array(width * height);
  forEachSpan(mask, (row, from, to) => bytes.fill(1, row * width + from, row * width + to));
  return bytes;
}

/** Calls for each maximal run of pixels in a row, from <= x < to, rows from top to bottom and runs from left to right. */
export function forEachSpan(mask: Mask, visit: (row: number, from: number, to: number) => void): void {
  const { stride, words, x, y, height } = mask;
  for (let row = 0; row < height; row++) {
    let from = -1;
    for (let word = 0; word < stride; word++) {
      const column = ((x >> 5) + word) << 5;
      let bits = words[row * stride + word]!;
      if (from >= 0) bits = ~bits;
      let offset = 0;
      while (bits !== 0) {
        // `bits` marks where the run changes next, from `offset` on.
        const step = 31 - Math.clz32(bits & -bits);
        offset = step;
        if (from < 0) from = column + offset;
        else {
          visit(y + row, from, column + offset);
          from = -1;
        }
        bits = ~bits & (offset === 31 ? 0 : -1 << (offset + 1));
      }
    }
    if (from >= 0) visit(y + row, from, ((x >> 5) + stride) << 5);
  }
}
