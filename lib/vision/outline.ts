import { maskFromBytes } from "@/lib/geometry/mask";
import { ringsArea } from "@/lib/geometry/region";
import { simplifyRings } from "@/lib/geometry/simplify";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Point, Rings } from "@/lib/geometry/types";
import { cutting, FIRST_FEATURES, lookAt, SECOND_FEATURES, type Cutting } from "./outlineFeatures";
import { rank, type Ranker } from "./ranker";
import type { Raster } from "./raster";
import { OUTLINE_WEIGHTS } from "./weights/outline";

/**
 * What a person knows of the object, px of the raster: its extreme points in order around it (top, right, bottom,
 * left or the reverse), points certainly inside, points certainly outside.
 */
export type OutlineHints = {
  extremes?: readonly Point[];
  inside?: readonly Point[];
  outside?: readonly Point[];
};
export type Outline = {
  rings: Rings;
  /** Expected IoU with the true outline, 0..1. */
  confidence: number;
};

/** Two looks, with the box alone and with the four extreme points. */
export type OutlineWeights = { box: [Ranker, Ranker]; extremes: [Ranker, Ranker] };

const IOU_LOSS_MAX = 0.02;
/** Below this share of the box, a found outline is a mistake and the inscribed ellipse is the better guess. */
const SHARE_MIN = 0.1;

/**
 * The outline of the object in a box, in px of the raster. Superpixels at two scales are judged twice by small learned
 * networks: by place, colour against the surroundings and way to the outside; then again knowing what was
 * thought of their neighbours (auto-context; Tu, CVPR 2008). Their mean probability a pixel, smoothed along what
 * looks alike, is cut where the expected IoU is highest; the largest part is traced and simplified. Hints are
 * certain. Deterministic. O(pixels of the box and its surroundings, at most about 200 x 200).
 */
export function outlineInBox(
  raster: Raster,
  box: Box,
  hints: OutlineHints = {},
  weights = OUTLINE_WEIGHTS,
): Outline {
  const cut = cutting(raster, box, orderedExtremes(hints.extremes));
  if (!cut) return { rings: [], confidence: 0 };
  const probability = objectProbability(cut, weights);
  return outlineFrom(cut, probability, box, hints);
}

/** From the topmost clockwise, whatever order they were given in; none unless there are four or more. */
function orderedExtremes(points: readonly Point[] = []): readonly Point[] {
  if (points.length < 4) return [];
  const x = points.reduce((sum, point) => sum + point[0], 0) / points.length;
  const y = points.reduce((sum, point) => sum + point[1], 0) / points.length;
  return [...points].sort((p, q) => Math.atan2(p[1] - y, p[0] - x) - Math.atan2(q[1] - y, q[0] - x));
}

/** Probability of each pixel of the cutting to belong to the object. */
export function objectProbability(cut: Cutting, weights: OutlineWeights): Float32Array {
  const [first, second] = cut.extremes.length >= 4 ? weights.extremes : weights.box;
  const prior = ellipsePrior(cut);
  const firstOpinions = cut.partitions.map((part) =>
    opinions(rank(first, lookAt(cut, part, prior, undefined))),
  );
  const middle = perPixel(cut, firstOpinions);
  const secondOpinions = cut.partitions.map((part, index) =>
    opinions(rank(second, lookAt(cut, part, middle, firstOpinions[index]!))),
  );
  return perPixel(cut, secondOpinions);
}

const opinions = (scores: Float64Array) => Float32Array.from(scores, (score) => 1 / (1 + Math.exp(-score)));

/** What is known before looking: likely in the middle of the box, not outside it. */
export function ellipsePrior({ width, height, box: [x, y, w, h] }: Cutting): Float32Array {
  const prior = new Float32Array(width * height);
  for (let py = 0, i = 0; py < height; py++) {
    const v = (py + 0.5 - (y + h / 2)) / (h / 2);
    for (let px = 0; px < width; px++, i++) {
      const u = (px + 0.5 - (x + w / 2)) / (w / 2);
      const r = Math.sqrt(u * u + v * v);
      if (Math.abs(u) <= 1 && Math.abs(v) <= 1) prior[i] = Math.max(0.05, Math.min(0.9, 1.35 - r));
    }
  }
  return prior;
}

/** The superpixels' opinions spread over their pixels, mean over the scales, nothing outside the box. */
export function perPixel(
  { width, height, box: [x, y, w, h], partitions }: Cutting,
  opinion: readonly Float32Array[],
): Float32Array {
  const out = new Float32Array(width * height);
  for (let py = 0, i = 0; py < height; py++) {
    const isRow = py + 0.5 >= y && py + 0.5 < y + h;
    for (let px = 0; px < width; px++, i++) {
      if (!isRow || px + 0.5 < x || px + 0.5 >= x + w) continue;
      let sum = 0;
      for (let p = 0; p < partitions.length; p++) sum += opinion[p]![partitions[p]!.label[i]!]!;
      out[i] = sum / partitions.length;
    }
  }
  return out;
}

/** Cuts, cleans, traces and simplifies; the inscribed ellipse where nothing credible is left. */
export function outlineFrom(cut: Cutting, probability: Float32Array, box: Box, hints: OutlineHints): Outline {
  const { width, height, left, top, scaleX, scaleY } = cut;
  const smooth = smoothAlike(cut, probability);
  const held = hold(cut, smooth, hints);
  const { level, iou } = bestLevel(smooth);
  const isIn = new Uint8Array(width * height);
  for (let i = 0; i < isIn.length; i++) isIn[i] = smooth[i]! >= level ? 1 : 0;
  const kept = withoutSpeckles(isIn, held, width, height);
  const pixels = kept.reduce((sum, bit) => sum + bit, 0);
  if (pixels < Math.max(6, SHARE_MIN * cut.box[2] * cut.box[3]))
    return { rings: [ellipseOf(box)], confidence: Math.min(iou, 0.4) };
  const traced = simplifyRings(traceMask(maskFromBytes(kept, width, height), 8), IOU_LOSS_MAX);
  const [x, y, w, h] = box;
  const toRaster = ([px, py]: Point): Point => [
    Math.min(x + w, Math.max(x, px / scaleX + left)),
    Math.min(y + h, Math.max(y, py / scaleY + top)),
  ];
  const rings = traced.map((ring) => ring.map(toRaster)).filter((ring) => ringsArea([ring]) > 0);
  return rings.length > 0
    ? { rings, confidence: iou }
    : { rings: [ellipseOf(box)], confidence: Math.min(iou, 0.4) };
}

/** What a person said is certain, within a small circle. */
function hold(
  { width, height, left, top, scaleX, scaleY, box }: Cutting,
  probability: Float32Array,
  { inside = [], outside = [] }: OutlineHints,
): Uint8Array {
  const held = new Uint8Array(width * height);
  const radius = Math.max(2, 0.04 * Math.max(box[2], box[3]));
  const mark = (points: readonly Point[], value: number) => {
    for (const [px, py] of points) {
      const cx = (px - left) * scaleX;
      const cy = (py - top) * scaleY;
      for (let row = Math.max(0, Math.floor(cy - radius)); row < Math.min(height, cy + radius); row++) {
        for (
          let column = Math.max(0, Math.floor(cx - radius));
          column < Math.min(width, cx + radius);
          column++
        ) {
          if (Math.hypot(column + 0.5 - cx, row + 0.5 - cy) <= radius) {
            probability[row * width + column] = value;
            held[row * width + column] = 1;
          }
        }
      }
    }
  };
  mark(outside, 0);
  mark(inside, 1);
  return held;
}

/** Two rounds of averaging with the four neighbours, each weighted by how alike it looks. */
function smoothAlike({ lab: { l, a, b }, width, height }: Cutting, probability: Float32Array): Float32Array {
  let now = probability;
  for (let round = 0; round < 3; round++) {
    const next = new Float32Array(now.length);
    for (let y = 0, i = 0; y < height; y++) {
      for (let x = 0; x < width; x++, i++) {
        let sum = now[i]!;
        let weight = 1;
        for (let side = 0; side < 4; side++) {
          const j =
            side === 0
              ? x > 0
                ? i - 1
                : i
              : side === 1
                ? x + 1 < width
                  ? i + 1
                  : i
                : side === 2
                  ? y > 0
                    ? i - width
                    : i
                  : y + 1 < height
                    ? i + width
                    : i;
          const d = Math.abs(l[i]! - l[j]!) + Math.abs(a[i]! - a[j]!) + Math.abs(b[i]! - b[j]!);
          const w = 1 / (1 + d * d * 0.08);
          sum += w * now[j]!;
          weight += w;
        }
        next[i] = sum / weight;
      }
    }
    now = next;
  }
  return now;
}

const LEVELS = 64;

/** The level at which the set above it has the highest expected IoU with the truth, and that IoU. */
function bestLevel(probability: Float32Array): { level: number; iou: number } {
  const counts = new Float64Array(LEVELS + 1);
  const sums = new Float64Array(LEVELS + 1);
  let total = 0;
  for (let i = 0; i < probability.length; i++) {
    const p = probability[i]!;
    const at = Math.min(LEVELS, Math.floor(p * LEVELS));
    counts[at]! += 1;
    sums[at]! += p;
    total += p;
  }
  let inside = 0;
  let pixels = 0;
  let best = { level: 0.5, iou: 0 };
  for (let at = LEVELS; at >= 1; at--) {
    inside += sums[at]!;
    pixels += counts[at]!;
    const iou = inside / Math.max(1, total + pixels - inside);
    if (iou > best.iou) best = { level: at / LEVELS, iou };
  }
  return best;
}

/** Parts under a tenth of the largest go, as do holes under a fiftieth of it, unless a person put them there. */
function withoutSpeckles(isIn: Uint8Array, held: Uint8Array, width: number, height: number): Uint8Array {
  const count = width * height;
  const part = new Int32Array(count);
  const stack = new Int32Array(count);
  const sizes = [0];
  const isRim = [false];
  const isHeld = [false];
  for (let start = 0; start < count; start++) {
    if (part[start] !== 0) continue;
    const name = sizes.length;
    const kind = isIn[start]!;
    let depth = 0;
    let size = 0;
    let rim = false;
    let keeps = false;
    stack[depth++] = start;
    part[start] = name;
    while (depth > 0) {
      const i = stack[--depth]!;
      size++;
      if (held[i]) keeps = true;
      const x = i % width;
      if (x === 0 || x === width - 1 || i < width || i >= count - width) rim = true;
      for (let side = 0; side < 4; side++) {
        if ((side === 0 && x === 0) || (side === 1 && x === width - 1)) continue;
        const j = side === 0 ? i - 1 : side === 1 ? i + 1 : side === 2 ? i - width : i + width;
        if (j < 0 || j >= count || part[j] !== 0 || isIn[j] !== kind) continue;
        part[j] = name;
        stack[depth++] = j;
      }
    }
    sizes.push(size);
    isRim.push(rim);
    isHeld.push(keeps);
  }
  let largest = 0;
  for (let i = 0; i < count; i++) if (isIn[i]) largest = Math.max(largest, sizes[part[i]!]!);
  const out = new Uint8Array(count);
  for (let i = 0; i < count; i++) {
    const size = sizes[part[i]!]!;
    if (isHeld[part[i]!]) out[i] = isIn[i]!;
    else
      out[i] = isIn[i]
        ? size >= 0.1 * largest
          ? 1
          : 0
        : !isRim[part[i]!]! && size < 0.02 * largest + 4
          ? 1
          : 0;
  }
  return out;
}

function ellipseOf([x, y, w, h]: Box): Point[] {
  return Array.from({ length: 20 }, (_, n): Point => {
    const angle = (n / 20) * 2 * Math.PI;
    return [x + w / 2 + (w / 2) * Math.cos(angle), y + h / 2 + (h / 2) * Math.sin(angle)];
  });
}

/** Widths of the two looks, for the command that learns their weights. */
export const LOOK_WIDTHS = [FIRST_FEATURES, SECOND_FEATURES] as const;
