import { traceMask } from "@/lib/geometry/trace";
import { simplifyRings } from "@/lib/geometry/simplify";
import { maskFromBytes } from "@/lib/geometry/mask";
import { ringsArea } from "@/lib/geometry/region";
import type { Box, Point, Rings } from "@/lib/geometry/types";
import { blur, toLab, type Lab } from "./lab";
import type { Raster } from "./raster";
import { segment } from "./segments";

export type OutlineHints = {
  extremes?: readonly Point[];
  inside?: readonly Point[];
  outside?: readonly Point[];
};
export type Outline = { rings: Rings; confidence: number };

const BINS = 10;
/** Of the box's ellipse, this much reads as object when colours say nothing. */
const PRIOR_WEIGHT = 1.1;
const IOU_LOSS_MAX = 0.02;

/**
 * The outline of the object in a box, in px of the raster. Colour models of the inside (the box's inscribed
 * ellipse) and the outside (a ring around the box) give each pixel a log ratio; it is averaged over
 * superpixels, joined with the ellipse as prior, and cut at zero; the largest part is traced and simplified.
 * Hints are certain. Two rounds, as in GrabCut (Rother et al., 2004), but on superpixels, where it does not
 * collapse. O(pixels of the box and its surroundings).
 */
export function outlineInBox(raster: Raster, box: Box, hints: OutlineHints = {}): Outline {
  const [x, y, w, h] = box;
  const margin = Math.max(4, Math.round(Math.max(w, h) * 0.2));
  const left = Math.max(0, Math.floor(x - margin));
  const top = Math.max(0, Math.floor(y - margin));
  const right = Math.min(raster.width, Math.ceil(x + w + margin));
  const bottom = Math.min(raster.height, Math.ceil(y + h + margin));
  const width = right - left;
  const height = bottom - top;
  if (width < 3 || height < 3) return { rings: [], confidence: 0 };
  const lab = smoothed(cut(raster, left, top, width, height));
  const parts = segment(lab, 18, Math.max(6, Math.round((w * h) / 400)));
  const inBox = (px: number, py: number) =>
    px + 0.5 >= x - left && px + 0.5 < x + w - left && py + 0.5 >= y - top && py + 0.5 < y + h - top;
  const radius = (px: number, py: number) =>
    Math.hypot((px + 0.5 - (x + w / 2 - left)) / (w / 2), (py + 0.5 - (y + h / 2 - top)) / (h / 2));

  const count = width * height;
  const bin = bins(lab);
  const isIn = new Uint8Array(count);
  for (let i = 0; i < count; i++) isIn[i] = radius(i % width, Math.floor(i / width)) <= 0.85 ? 1 : 0;
  const certain = new Int8Array(parts.count);
  const mark = (points: readonly Point[] | undefined, value: 1 | -1) => {
    for (const [px, py] of points ?? []) {
      const cx = Math.floor(px - left);
      const cy = Math.floor(py - top);
      if (cx >= 0 && cy >= 0 && cx < width && cy < height) certain[parts.label[cy * width + cx]!] = value;
    }
  };
  mark(hints.outside, -1);
  mark(hints.inside, 1);

  const chosen = new Uint8Array(parts.count);
  let sureness = 0;
  for (let round = 0; round < 3; round++) {
    const ratio = logRatios(bin, isIn, count);
    const score = new Float64Array(parts.count);
    const size = new Float64Array(parts.count);
    const inside = new Float64Array(parts.count);
    for (let i = 0; i < count; i++) {
      const part = parts.label[i]!;
      const px = i % width;
      const py = (i / width) | 0;
      size[part]! += 1;
      if (inBox(px, py)) inside[part]! += 1;
      score[part]! += ratio[bin[i]!]! + PRIOR_WEIGHT * (1 - radius(px, py) ** 2);
    }
    sureness = 0;
    let total = 0;
    for (let part = 0; part < parts.count; part++) {
      const mean = score[part]! / size[part]!;
      const share = inside[part]! / size[part]!;
      // A superpixel that mostly lies outside the box belongs to what is around (straddling; Alexe et al., 2012).
      chosen[part] = certain[part] === 1 || (certain[part] !== -1 && share > 0.65 && mean > 0) ? 1 : 0;
      if (share > 0) {
        sureness += Math.min(2, Math.abs(mean)) * inside[part]!;
        total += 2 * inside[part]!;
      }
    }
    sureness = total > 0 ? sureness / total : 0;
    for (let i = 0; i < count; i++)
      isIn[i] = chosen[parts.label[i]!]! && inBox(i % width, (i / width) | 0) ? 1 : 0;
  }
  const kept = largestFilled(isIn, width, height);
  const pixels = kept.reduce((sum, bit) => sum + bit, 0);
  if (pixels < Math.max(8, 0.12 * w * h)) return { rings: [ellipse(box)], confidence: 0.2 };
  const rings = simplifyRings(traceMask(maskFromBytes(kept, width, height), 8), IOU_LOSS_MAX).map((ring) =>
    ring.map(([px, py]): Point => [px + left, py + top]),
  );
  return { rings: rings.filter((ring) => ringsArea([ring]) >= 4), confidence: Math.min(1, sureness) };
}

function ellipse([x, y, w, h]: Box): Point[] {
  return Array.from({ length: 16 }, (_, n): Point => {
    const angle = (n / 16) * 2 * Math.PI;
    return [x + w / 2 + (w / 2) * Math.cos(angle), y + h / 2 + (h / 2) * Math.sin(angle)];
  });
}

function cut(raster: Raster, left: number, top: number, width: number, height: number): Raster {
  const data = new Uint8Array(width * height * 3);
  for (let row = 0; row < height; row++) {
    const start = ((top + row) * raster.width + left) * 3;
    data.set(raster.data.subarray(start, start + width * 3), row * width * 3);
  }
  return { width, height, data };
}

function smoothed(raster: Raster): Lab {
  const lab = toLab(raster);
  const soft = (plane: Float32Array) => blur(plane, lab.width, lab.height);
  return { ...lab, l: soft(lab.l), a: soft(lab.a), b: soft(lab.b) };
}

/** Colour bin of each pixel; chroma more finely than it would need for its range, as it is what differs. */
function bins({ l, a, b }: Lab): Uint16Array {
  const step = (value: number, low: number, high: number) =>
    Math.min(BINS - 1, Math.max(0, (((value - low) / (high - low)) * BINS) | 0));
  return Uint16Array.from(
    l,
    (value, i) => (step(value, 0, 100) * BINS + step(a[i]!, -50, 60)) * BINS + step(b[i]!, -50, 60),
  );
}

function logRatios(bin: Uint16Array, isIn: Uint8Array, count: number): Float64Array {
  const cells = BINS ** 3;
  const fore = new Float64Array(cells);
  const back = new Float64Array(cells);
  let foreSum = 0;
  let backSum = 0;
  for (let i = 0; i < count; i++) {
    if (isIn[i]) {
      fore[bin[i]!]! += 1;
      foreSum += 1;
    } else {
      back[bin[i]!]! += 1;
      backSum += 1;
    }
  }
  const ratio = new Float64Array(cells);
  for (let cell = 0; cell < cells; cell++) {
    const inside = (fore[cell]! + 0.5) / (foreSum + 0.5 * cells);
    const outside = (back[cell]! + 0.5) / (backSum + 0.5 * cells);
    ratio[cell] = Math.max(-3, Math.min(3, Math.log(inside / outside)));
  }
  return ratio;
}

/** The largest 4-connected part of a mask with its holes filled. */
function largestFilled(isIn: Uint8Array, width: number, height: number): Uint8Array {
  const count = width * height;
  const seen = new Int32Array(count);
  const stack = new Int32Array(count);
  let best = 0;
  let bestSize = 0;
  let name = 0;
  const flood = (start: number, name: number, wanted: number): number => {
    let depth = 0;
    let size = 0;
    stack[depth++] = start;
    seen[start] = name;
    while (depth > 0) {
      const i = stack[--depth]!;
      size += 1;
      const px = i % width;
      const visit = (j: number) => {
        if (seen[j] === 0 && isIn[j] === wanted) {
          seen[j] = name;
          stack[depth++] = j;
        }
      };
      if (px > 0) visit(i - 1);
      if (px + 1 < width) visit(i + 1);
      if (i >= width) visit(i - width);
      if (i + width < count) visit(i + width);
    }
    return size;
  };
  for (let i = 0; i < count; i++) {
    if (!isIn[i] || seen[i]) continue;
    const size = flood(i, ++name, 1);
    if (size > bestSize) [best, bestSize] = [name, size];
  }
  const kept = new Uint8Array(count);
  if (best === 0) return kept;
  for (let i = 0; i < count; i++) kept[i] = seen[i] === best ? 1 : 0;
  // Ground that does not reach the border of the cutting is a hole.
  const ground = new Int32Array(count);
  let depth = 0;
  const enter = (i: number) => {
    if (!kept[i] && !ground[i]) {
      ground[i] = 1;
      stack[depth++] = i;
    }
  };
  for (let x = 0; x < width; x++) {
    enter(x);
    enter((height - 1) * width + x);
  }
  for (let y = 0; y < height; y++) {
    enter(y * width);
    enter(y * width + width - 1);
  }
  while (depth > 0) {
    const i = stack[--depth]!;
    const px = i % width;
    if (px > 0) enter(i - 1);
    if (px + 1 < width) enter(i + 1);
    if (i >= width) enter(i - width);
    if (i + width < count) enter(i + width);
  }
  for (let i = 0; i < count; i++) if (!ground[i]) kept[i] = 1;
  return kept;
}
