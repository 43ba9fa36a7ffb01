import { gradientOf, integralOf, sumIn, type Gradient } from "@/lib/vision/gradient";
import type { Lab } from "@/lib/vision/lab";
import type { Segments } from "@/lib/vision/segments";
import { DIRECTIONS } from "./hierarchy";

const L_BINS = 8;
const AB_BINS = 6;
const BINS = L_BINS + 2 * AB_BINS;
/** Samples along each side of a box when its segments are counted. */
const SAMPLES = 16;

/** Numbers of a box that its pixels give; order is part of the learned weights. */
export const BOX_FEATURES = 22;

/** The whole picture in px of the part that is looked at, whose origin is the part's top left corner moved by left and top. */
export type Frame = { left: number; top: number; width: number; height: number };

/** Sums over a picture that make the features of any box cheap. */
export type BoxContext = {
  width: number;
  height: number;
  gradient: Gradient;
  /** Integral of the clipped gradient. */
  edges: Float64Array;
  /** Interleaved integral histogram of Lab. */
  colours: Int32Array;
  segmentations: readonly Segments[];
  segmentSizes: readonly Int32Array[];
  meanEdge: number;
  frame: Frame;
};

/** O(pixels x colour bins). */
export function boxContext(
  lab: Lab,
  segmentations: readonly Segments[],
  frame: Frame,
  gradient = gradientOf(lab, DIRECTIONS),
): BoxContext {
  const { width, height } = lab;
  const clipped = gradient.strength.map((value) => Math.min(value, 12));
  const edges = integralOf(clipped, width, height);
  return {
    width,
    height,
    gradient,
    edges,
    colours: colourIntegral(lab),
    segmentations,
    segmentSizes: segmentations.map(({ label, count }) => {
      const sizes = new Int32Array(count);
      for (let i = 0; i < label.length; i++) sizes[label[i]!]! += 1;
      return sizes;
    }),
    frame,
    meanEdge: edges[edges.length - 1]! / (width * height),
  };
}

function colourIntegral({ width, height, l, a, b }: Lab): Int32Array {
  const stride = (width + 1) * BINS;
  const sums = new Int32Array(stride * (height + 1));
  const row = new Int32Array(BINS);
  const bin = (value: number, low: number, high: number, bins: number) =>
    Math.min(bins - 1, Math.max(0, (((value - low) / (high - low)) * bins) | 0));
  for (let y = 0; y < height; y++) {
    row.fill(0);
    for (let x = 0; x < width; x++) {
      const i = y * width + x;
      row[bin(l[i]!, 0, 100, L_BINS)]! += 1;
      row[L_BINS + bin(a[i]!, -30, 40, AB_BINS)]! += 1;
      row[L_BINS + AB_BINS + bin(b[i]!, -30, 45, AB_BINS)]! += 1;
      const at = (y + 1) * stride + (x + 1) * BINS;
      for (let n = 0; n < BINS; n++) sums[at + n] = sums[at - stride + n]! + row[n]!;
    }
  }
  return sums;
}

const inside = new Float64Array(BINS);
const around = new Float64Array(BINS);
let hits = new Int32Array(0);

/**
 * Writes BOX_FEATURES numbers for the half-open px box: where it lies, centre against surround colour, edges at its
 * border, within and around, and superpixel straddling at each scale (Alexe et al., 2012). O(samples).
 */
export function boxFeatures(
  context: BoxContext,
  left: number,
  top: number,
  right: number,
  bottom: number,
  out: Float32Array,
  at: number,
): void {
  const { width, height, edges, frame } = context;
  const w = right - left;
  const h = bottom - top;
  const stride = width + 1;
  const area = w * h;
  const logSide = Math.log2(Math.sqrt(area / (frame.width * frame.height))); // 0 for the whole picture
  const aspect = Math.log2(w / h);
  const cx = (frame.left + (left + right) / 2) / frame.width - 0.5;
  const cy = (frame.top + (top + bottom) / 2) / frame.height - 0.5;
  const sides =
    (left <= 1 ? 1 : 0) + (top <= 1 ? 1 : 0) + (right >= width - 1 ? 1 : 0) + (bottom >= height - 1 ? 1 : 0);
  out[at] = logSide / 3 + 1;
  out[at + 1] = (logSide / 3 + 1) ** 2;
  out[at + 2] = aspect;
  out[at + 3] = Math.abs(aspect);
  out[at + 4] = Math.abs(cx) * 2;
  out[at + 5] = cy * 2;
  out[at + 6] = Math.abs(cy) * 2;
  out[at + 7] = sides / 2;
  out[at + 8] = (w >= width * 0.95 ? 1 : 0) + (h >= height * 0.95 ? 1 : 0);

  // Surround of the same area as the box.
  const growX = Math.max(1, Math.round(w * 0.21));
  const growY = Math.max(1, Math.round(h * 0.21));
  const outLeft = Math.max(0, left - growX);
  const outTop = Math.max(0, top - growY);
  const outRight = Math.min(width, right + growX);
  const outBottom = Math.min(height, bottom + growY);
  histogramIn(context, left, top, right, bottom, inside);
  histogramIn(context, outLeft, outTop, outRight, outBottom, around);
  const ringArea = (outRight - outLeft) * (outBottom - outTop) - area;
  let chi = 0;
  let chiChroma = 0;
  for (let n = 0; n < BINS; n++) {
    const p = inside[n]! / area;
    const q = ringArea > 0 ? (around[n]! - inside[n]!) / ringArea : p;
    const part = p + q > 0 ? ((p - q) * (p - q)) / (p + q) : 0;
    chi += part;
    if (n >= L_BINS) chiChroma += part;
  }
  out[at + 9] = chi / 2;
  out[at + 10] = chiChroma / 2;

  // Edges: a rim inside the border, the core, and the ring outside.
  const rimX = Math.max(1, Math.round(w * 0.12));
  const rimY = Math.max(1, Math.round(h * 0.12));
  const whole = sumIn(edges, stride, left, top, right, bottom);
  const hasCore = w > 2 * rimX && h > 2 * rimY;
  const core = hasCore ? sumIn(edges, stride, left + rimX, top + rimY, right - rimX, bottom - rimY) : 0;
  const coreArea = hasCore ? (w - 2 * rimX) * (h - 2 * rimY) : 0;
  const rim = (whole - core) / Math.max(1, area - coreArea);
  const coreMean = coreArea > 0 ? core / coreArea : rim;
  const ring =
    ringArea > 0 ? (sumIn(edges, stride, outLeft, outTop, outRight, outBottom) - whole) / ringArea : 0;
  out[at + 11] = Math.log2(1 + rim);
  out[at + 12] = Math.log2(1 + coreMean);
  out[at + 13] = Math.log2(1 + ring);
  out[at + 14] = (rim - ring) / (rim + ring + 0.3);
  out[at + 15] = (coreMean - ring) / (coreMean + ring + 0.3);
  // How often gradients cut each side of the box straight across: a good box cuts few.
  out[at + 16] = crossing(context, left, top, right, bottom);
  out[at + 17] = Math.log2(1 + context.meanEdge);
  out[at + 18] = Math.log2((whole / area + 0.2) / (context.meanEdge + 0.2));

  let straddle = 0;
  for (let scale = 0; scale < 3; scale++) {
    const segments = context.segmentations[scale];
    // With fewer scales the last one speaks for the rest.
    if (segments) straddle = straddling(segments, context.segmentSizes[scale]!, left, top, right, bottom);
    out[at + 19 + scale] = straddle;
  }
}

/** Numbers of `colourFeatures`. */
export const COLOUR_FEATURES = 3 * BINS;

/**
 * Colour histograms of the middle of a box (half its area), of the whole, and of the whole less its surround: what a thing
 * looks like however it is turned. Roots, so that small shares count. O(bins).
 */
export function colourFeatures(
  context: BoxContext,
  left: number,
  top: number,
  right: number,
  bottom: number,
  out: Float32Array,
  at: number,
): void {
  const { width, height } = context;
  const w = right - left;
  const h = bottom - top;
  const inX = Math.floor(w * 0.15);
  const inY = Math.floor(h * 0.15);
  const middleArea = (w - 2 * inX) * (h - 2 * inY);
  histogramIn(context, left + inX, top + inY, right - inX, bottom - inY, around);
  for (let n = 0; n < BINS; n++) out[at + n] = Math.sqrt(around[n]! / middleArea);
  const growX = Math.max(1, Math.round(w * 0.25));
  const growY = Math.max(1, Math.round(h * 0.25));
  const outLeft = Math.max(0, left - growX);
  const outTop = Math.max(0, top - growY);
  const outRight = Math.min(width, right + growX);
  const outBottom = Math.min(height, bottom + growY);
  histogramIn(context, left, top, right, bottom, inside);
  histogramIn(context, outLeft, outTop, outRight, outBottom, around);
  const ring = Math.max(1, (outRight - outLeft) * (outBottom - outTop) - w * h);
  for (let n = 0; n < BINS; n++) {
    const own = Math.sqrt(inside[n]! / (w * h));
    out[at + BINS + n] = own;
    out[at + 2 * BINS + n] = own - Math.sqrt((around[n]! - inside[n]!) / ring);
  }
}

function histogramIn(
  { width, colours }: BoxContext,
  left: number,
  top: number,
  right: number,
  bottom: number,
  into: Float64Array,
): void {
  const stride = (width + 1) * BINS;
  const topLeft = top * stride + left * BINS;
  const topRight = top * stride + right * BINS;
  const bottomLeft = bottom * stride + left * BINS;
  const bottomRight = bottom * stride + right * BINS;
  for (let n = 0; n < BINS; n++) {
    into[n] =
      colours[bottomRight + n]! - colours[topRight + n]! - colours[bottomLeft + n]! + colours[topLeft + n]!;
  }
}

/** Mean strength of gradients whose contour runs across the border (their direction lies along it), Lab units, log. */
function crossing(
  { width, height, gradient }: BoxContext,
  left: number,
  top: number,
  right: number,
  bottom: number,
): number {
  const { strength, direction } = gradient;
  let sum = 0;
  let count = 0;
  const stepX = Math.max(1, Math.floor((right - left) / SAMPLES));
  const stepY = Math.max(1, Math.floor((bottom - top) / SAMPLES));
  // Direction 0 is a gradient along x (an upright contour), DIRECTIONS / 2 one along y.
  const isUpright = (d: number) => d < DIRECTIONS / 4 || d >= DIRECTIONS - DIRECTIONS / 4;
  for (const y of [top, bottom - 1]) {
    if (y <= 0 || y >= height - 1) continue;
    for (let x = left; x < right; x += stepX) {
      const i = y * width + x;
      if (isUpright(direction[i]!)) sum += Math.min(strength[i]!, 12);
      count++;
    }
  }
  for (const x of [left, right - 1]) {
    if (x <= 0 || x >= width - 1) continue;
    for (let y = top; y < bottom; y += stepY) {
      const i = y * width + x;
      if (!isUpright(direction[i]!)) sum += Math.min(strength[i]!, 12);
      count++;
    }
  }
  return Math.log2(1 + (count > 0 ? sum / count : 0));
}

/** 1 where no segment crosses the border of the box, falling as more of their area does. */
function straddling(
  segments: Segments,
  sizes: Int32Array,
  left: number,
  top: number,
  right: number,
  bottom: number,
): number {
  const { width, label } = segments;
  if (hits.length < segments.count) hits = new Int32Array(segments.count);
  const stepX = Math.max(1, Math.floor((right - left) / SAMPLES));
  const stepY = Math.max(1, Math.floor((bottom - top) / SAMPLES));
  let samples = 0;
  for (let y = top + (stepY >> 1); y < bottom; y += stepY) {
    for (let x = left + (stepX >> 1); x < right; x += stepX) {
      hits[label[y * width + x]!]! += 1;
      samples++;
    }
  }
  const weight = ((right - left) * (bottom - top)) / Math.max(1, samples);
  let crossed = 0;
  for (let y = top + (stepY >> 1); y < bottom; y += stepY) {
    for (let x = left + (stepX >> 1); x < right; x += stepX) {
      const segment = label[y * width + x]!;
      const count = hits[segment]!;
      if (count === 0) continue;
      hits[segment] = 0;
      const within = count * weight;
      crossed += Math.min(within, Math.max(0, sizes[segment]! - within));
    }
  }
  return 1 - Math.min(1, crossed / Math.max(1, (right - left) * (bottom - top)));
}
