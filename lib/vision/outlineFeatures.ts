import type { Box, Point } from "@/lib/geometry/types";
import { gradientOf } from "./gradient";
import { blurLab, toLab, type Lab } from "./lab";
import { cutRaster, shrinkRaster, type Raster } from "./raster";
import { pixelGraph, segmentGraph, type Segments } from "./segments";

/** Longer side of the box in the cutting, px: finer outlines are not told apart by the eye. */
const BOX_SIDE_PX = 128;
const MARGIN = 0.22;
/** Scales of the superpixels; their opinions are averaged, which smooths what one partition gets wrong. */
const SCALES = [4, 10] as const;
const L_BINS = 8;
const AB_BINS = 10;
const CELLS = L_BINS * AB_BINS * AB_BINS;

/** A box and its surroundings at working size. */
export type Cutting = {
  lab: Lab;
  width: number;
  height: number;
  /** The box in px of the cutting. */
  box: Box;
  /** To the raster: x / scaleX + left. */
  left: number;
  top: number;
  scaleX: number;
  scaleY: number;
  extremes: readonly Point[];
  bin: Uint16Array;
  partitions: readonly Partition[];
};

/** Superpixels with their neighbours. */
export type Partition = Segments & {
  size: Float64Array;
  inBox: Float64Array;
  neighbours: readonly Map<number, { length: number; strength: number }>[];
  /** Mean L, a, b. */
  colour: Float32Array;
  /** Mean position in px of the cutting. */
  centre: Float32Array;
};

/** Undefined where too little of the box lies in the raster. O(pixels of the box). */
export function cutting(
  raster: Raster,
  [x, y, w, h]: Box,
  extremes: readonly Point[] = [],
): Cutting | undefined {
  const margin = Math.max(3, Math.max(w, h) * MARGIN);
  const left = Math.max(0, Math.floor(x - margin));
  const top = Math.max(0, Math.floor(y - margin));
  const right = Math.min(raster.width, Math.ceil(x + w + margin));
  const bottom = Math.min(raster.height, Math.ceil(y + h + margin));
  if (right - left < 5 || bottom - top < 5 || !(w >= 2) || !(h >= 2)) return undefined;
  if (x >= raster.width || y >= raster.height || x + w <= 0 || y + h <= 0) return undefined;
  const part = cutRaster(raster, left, top, right - left, bottom - top);
  const small = shrinkRaster(
    part,
    Math.max(8, Math.round((BOX_SIDE_PX * Math.max(part.width, part.height)) / Math.max(w, h))),
  );
  const { width, height } = small;
  const scaleX = width / part.width;
  const scaleY = height / part.height;
  const lab = blurLab(toLab(small));
  const box: Box = [(x - left) * scaleX, (y - top) * scaleY, w * scaleX, h * scaleY];
  const graph = pixelGraph(width, height, [lab.l, lab.a, lab.b]);
  const gradient = gradientOf(lab, 8);
  const sizeMin = Math.max(5, Math.round((box[2] * box[3]) / 700));
  const partitions = SCALES.map((k) =>
    partition(segmentGraph(graph, k, sizeMin), lab, gradient.strength, box),
  );
  const toCutting = ([px, py]: Point): Point => [(px - left) * scaleX, (py - top) * scaleY];
  return {
    lab,
    width,
    height,
    box,
    left,
    top,
    scaleX,
    scaleY,
    extremes: extremes.map(toCutting),
    bin: binned(lab),
    partitions,
  };
}

function binned({ l, a, b }: Lab): Uint16Array {
  const step = (value: number, low: number, high: number, bins: number) =>
    Math.min(bins - 1, Math.max(0, (((value - low) / (high - low)) * bins) | 0));
  return Uint16Array.from(
    l,
    (value, i) =>
      (step(value, 0, 100, L_BINS) * AB_BINS + step(a[i]!, -40, 50, AB_BINS)) * AB_BINS +
      step(b[i]!, -40, 55, AB_BINS),
  );
}

function partition(
  segments: Segments,
  { l, a, b }: Lab,
  strength: Float32Array,
  [x, y, w, h]: Box,
): Partition {
  const { width, height, label, count } = segments;
  const size = new Float64Array(count);
  const inBox = new Float64Array(count);
  const colour = new Float32Array(count * 3);
  const centre = new Float32Array(count * 2);
  const neighbours = Array.from(
    { length: count },
    () => new Map<number, { length: number; strength: number }>(),
  );
  const touch = (p: number, q: number, value: number) => {
    let link = neighbours[p]!.get(q);
    if (!link) {
      link = { length: 0, strength: 0 };
      neighbours[p]!.set(q, link);
      neighbours[q]!.set(p, link);
    }
    link.length += 1;
    link.strength += value;
  };
  for (let py = 0, i = 0; py < height; py++) {
    for (let px = 0; px < width; px++, i++) {
      const s = label[i]!;
      size[s]! += 1;
      if (px + 0.5 >= x && px + 0.5 < x + w && py + 0.5 >= y && py + 0.5 < y + h) inBox[s]! += 1;
      colour[s * 3]! += l[i]!;
      colour[s * 3 + 1]! += a[i]!;
      colour[s * 3 + 2]! += b[i]!;
      centre[s * 2]! += px + 0.5;
      centre[s * 2 + 1]! += py + 0.5;
      if (px + 1 < width && label[i + 1] !== s)
        touch(s, label[i + 1]!, (strength[i]! + strength[i + 1]!) / 2);
      if (py + 1 < height && label[i + width] !== s)
        touch(s, label[i + width]!, (strength[i]! + strength[i + width]!) / 2);
    }
  }
  for (let s = 0; s < count; s++) {
    for (let c = 0; c < 3; c++) colour[s * 3 + c]! /= size[s]!;
    centre[s * 2]! /= size[s]!;
    centre[s * 2 + 1]! /= size[s]!;
  }
  return { ...segments, size, inBox, neighbours, colour, centre };
}

/** Numbers of a superpixel for the first and the second look; order is part of the learned weights. */
export const FIRST_FEATURES = 26;
export const SECOND_FEATURES = FIRST_FEATURES + 8;

/**
 * What a superpixel's place, colour and way to the outside say about whether it is the object's: FIRST_FEATURES numbers
 * each. `fore` is the probability of each pixel to be object, so far (an ellipse at first).
 */
export function lookAt(
  cut: Cutting,
  part: Partition,
  fore: Float32Array,
  second: Float32Array | undefined,
): Float32Array {
  const { box, lab, width, height } = cut;
  const [x, y, w, h] = box;
  const { count, label, size, inBox, neighbours, colour, centre } = part;
  const ratio = logRatios(cut, fore);
  const ratioSum = new Float64Array(count);
  const radiusSum = new Float64Array(count);
  const radiusMin = new Float64Array(count).fill(9);
  const radiusMax = new Float64Array(count);
  const spread = new Float64Array(count);
  const prior = new Float64Array(count);
  const rim = new Float64Array(count);
  for (let py = 0, i = 0; py < height; py++) {
    const v = (py + 0.5 - (y + h / 2)) / (h / 2);
    for (let px = 0; px < width; px++, i++) {
      const s = label[i]!;
      const u = (px + 0.5 - (x + w / 2)) / (w / 2);
      const r = Math.sqrt(u * u + v * v);
      radiusSum[s]! += r;
      if (r < radiusMin[s]!) radiusMin[s] = r;
      if (r > radiusMax[s]!) radiusMax[s] = r;
      ratioSum[s]! += ratio[cut.bin[i]!]!;
      prior[s]! += fore[i]!;
      const d = lab.l[i]! - colour[s * 3]!;
      spread[s]! += d * d;
      if (px === 0 || py === 0 || px === width - 1 || py === height - 1) rim[s]! += 1;
    }
  }
  const outside = Array.from({ length: count }, (_, s) => inBox[s]! / size[s]! < 0.3);
  const core = Array.from(
    { length: count },
    (_, s) => radiusSum[s]! / size[s]! < 0.45 && inBox[s]! / size[s]! > 0.9,
  );
  const fromOutside = geodesic(part, outside);
  const fromCore = geodesic(part, core);
  // The nearest colour among what certainly lies outside, and within the core.
  const nearest = (s: number, among: readonly boolean[]): number => {
    let best = 60;
    for (let t = 0; t < count; t++) {
      if (!among[t] || t === s || size[t]! < 12) continue;
      const distance = colourDistance(colour, s, t);
      if (distance < best) best = distance;
    }
    return best;
  };
  const boxArea = w * h;
  const stretch = Math.log2(w / h);
  const out = new Float32Array(count * (second ? SECOND_FEATURES : FIRST_FEATURES));
  const extremes = cut.extremes.length >= 4 ? extremeFeatures(cut, part) : undefined;
  for (let s = 0; s < count; s++) {
    const n = size[s]!;
    const at = s * (second ? SECOND_FEATURES : FIRST_FEATURES);
    const u = (centre[s * 2]! - (x + w / 2)) / (w / 2);
    const v = (centre[s * 2 + 1]! - (y + h / 2)) / (h / 2);
    let length = 0;
    let strength = 0;
    let ownOutside = 0;
    for (const [other, link] of neighbours[s]!) {
      length += link.length;
      strength += link.strength;
      if (outside[other]) ownOutside += link.length;
    }
    const share = inBox[s]! / n;
    const outNear = nearest(s, outside);
    const coreNear = nearest(s, core);
    out[at] = share;
    out[at + 1] = share > 0.97 ? 1 : 0;
    out[at + 2] = radiusSum[s]! / n;
    out[at + 3] = radiusMin[s]!;
    out[at + 4] = Math.min(3, radiusMax[s]!);
    out[at + 5] = Math.abs(u);
    out[at + 6] = Math.abs(v);
    out[at + 7] = v;
    out[at + 8] = Math.max(Math.abs(u), Math.abs(v));
    out[at + 9] = ratioSum[s]! / n;
    out[at + 10] = Math.log2(1 + outNear);
    out[at + 11] = Math.log2(1 + coreNear);
    out[at + 12] = Math.log2(1 + fromOutside[s]!);
    out[at + 13] = Math.log2(1 + fromCore[s]!);
    out[at + 14] = Math.log2(1 + fromOutside[s]!) - Math.log2(1 + fromCore[s]!);
    out[at + 15] = Math.log2(n / boxArea) / 4;
    out[at + 16] = length > 0 ? ownOutside / length : 0;
    out[at + 17] = Math.log2(1 + (length > 0 ? strength / length : 0));
    out[at + 18] = Math.log2(1 + Math.sqrt(spread[s]! / n));
    out[at + 19] = Math.min(1, rim[s]! / Math.sqrt(n));
    out[at + 20] = stretch;
    out[at + 21] = Math.abs(stretch) * Math.abs(w > h ? v : u);
    out[at + 22] = extremes ? extremes[s * 4]! : 0;
    out[at + 23] = extremes ? extremes[s * 4 + 1]! : 0;
    out[at + 24] = extremes ? extremes[s * 4 + 2]! : 0;
    out[at + 25] = extremes ? extremes[s * 4 + 3]! : 0;
    if (!second) continue;
    // The second look knows what the first thought of this superpixel, of its neighbours, and of the whole.
    let around = 0;
    let alike = 0;
    let alikeWeight = 0;
    let leastAround = 1;
    let mostAround = 0;
    for (const [other, link] of neighbours[s]!) {
      around += link.length * second[other]!;
      const weight = link.length * Math.exp(-link.strength / link.length / 2.5);
      alike += weight * second[other]!;
      alikeWeight += weight;
      if (second[other]! < leastAround) leastAround = second[other]!;
      if (second[other]! > mostAround) mostAround = second[other]!;
    }
    out[at + 26] = logit(second[s]!);
    out[at + 27] = length > 0 ? around / length : second[s]!;
    out[at + 28] = alikeWeight > 0 ? alike / alikeWeight : second[s]!;
    out[at + 29] = leastAround;
    out[at + 30] = mostAround;
    out[at + 31] = prior[s]! / n;
    out[at + 32] = lookAlike(part, second, s);
    out[at + 33] = logit(prior[s]! / n);
  }
  return out;
}

const logit = (p: number) => Math.log((p + 0.01) / (1.01 - p));

/** Mean opinion on superpixels of like colour anywhere in the cutting. */
function lookAlike({ count, colour, size }: Partition, opinion: Float32Array, s: number): number {
  let sum = 0;
  let weight = 0;
  for (let t = 0; t < count; t++) {
    const w = Math.sqrt(size[t]!) * Math.exp(-colourDistance(colour, s, t) / 5);
    sum += w * opinion[t]!;
    weight += w;
  }
  return sum / weight;
}

function colourDistance(colour: Float32Array, s: number, t: number): number {
  const d0 = colour[s * 3]! - colour[t * 3]!;
  const d1 = colour[s * 3 + 1]! - colour[t * 3 + 1]!;
  const d2 = colour[s * 3 + 2]! - colour[t * 3 + 2]!;
  return Math.sqrt(d0 * d0 + d1 * d1 + d2 * d2);
}

/** Log odds of each colour bin, smoothed over its neighbours in the histogram of what is sure. */
function logRatios({ bin, width, height }: Cutting, fore: Float32Array): Float32Array {
  const inside = new Float64Array(CELLS);
  const outside = new Float64Array(CELLS);
  let insideSum = 0;
  let outsideSum = 0;
  for (let i = 0; i < width * height; i++) {
    const p = fore[i]!;
    inside[bin[i]!]! += p;
    outside[bin[i]!]! += 1 - p;
    insideSum += p;
    outsideSum += 1 - p;
  }
  const ratio = new Float32Array(CELLS);
  for (let c = 0; c < CELLS; c++) {
    ratio[c] = Math.log((inside[c]! + 3) / (insideSum + 3)) - Math.log((outside[c]! + 3) / (outsideSum + 3));
    ratio[c] = Math.max(-3, Math.min(3, ratio[c]!));
  }
  return ratio;
}

/** Least sum of border strengths on the way from the seeds (Wei et al., ECCV 2012); 60 where none leads there. O(n² ) at worst. */
function geodesic({ count, neighbours, colour }: Partition, isSeed: readonly boolean[]): Float64Array {
  const distance = new Float64Array(count).fill(60);
  const done = new Uint8Array(count);
  for (let s = 0; s < count; s++) if (isSeed[s]) distance[s] = 0;
  for (;;) {
    let next = -1;
    for (let s = 0; s < count; s++)
      if (!done[s] && distance[s]! < 60 && (next < 0 || distance[s]! < distance[next]!)) next = s;
    if (next < 0) return distance;
    done[next] = 1;
    for (const [other, link] of neighbours[next]!) {
      const step = Math.max(
        0,
        Math.min(link.strength / link.length, colourDistance(colour, next, other)) - 0.5,
      );
      if (distance[next]! + step < distance[other]!) distance[other] = distance[next]! + step;
    }
  }
}

/** How a superpixel lies to the quadrilateral of the extreme points, and how like it is to what they touch. */
function extremeFeatures({ extremes, box, width, height }: Cutting, part: Partition): Float32Array {
  const { count, label, colour, centre } = part;
  const side = Math.sqrt(box[2] * box[3]);
  const out = new Float32Array(count * 4);
  const at = extremes.map(([px, py]) => {
    // A step inwards from the point lies on the object.
    const cx = px + (box[0] + box[2] / 2 - px) * 0.08;
    const cy = py + (box[1] + box[3] / 2 - py) * 0.08;
    const column = Math.min(width - 1, Math.max(0, Math.floor(cx)));
    const row = Math.min(height - 1, Math.max(0, Math.floor(cy)));
    return label[row * width + column]!;
  });
  const near = geodesic(
    part,
    Array.from({ length: count }, (_, s) => at.includes(s)),
  );
  for (let s = 0; s < count; s++) {
    const p: Point = [centre[s * 2]!, centre[s * 2 + 1]!];
    out[s * 4] = Math.max(-1, Math.min(1, (signedDistance(extremes, p) / side) * 3));
    out[s * 4 + 1] = Math.log2(1 + near[s]!);
    out[s * 4 + 2] = Math.min(...at.map((t) => Math.log2(1 + colourDistance(colour, s, t))));
    out[s * 4 + 3] = Math.min(
      1,
      Math.min(...extremes.map(([px, py]) => Math.hypot(px - p[0], py - p[1]))) / side,
    );
  }
  return out;
}

/** Distance to the quadrilateral's outline, positive inside. Points in order around it. */
function signedDistance(ring: readonly Point[], [px, py]: Point): number {
  let best = Infinity;
  let isInside = false;
  for (let i = 0; i < ring.length; i++) {
    const [ax, ay] = ring[i]!;
    const [bx, by] = ring[(i + 1) % ring.length]!;
    const length = (bx - ax) ** 2 + (by - ay) ** 2;
    const t =
      length > 0 ? Math.max(0, Math.min(1, ((px - ax) * (bx - ax) + (py - ay) * (by - ay)) / length)) : 0;
    best = Math.min(best, Math.hypot(px - ax - t * (bx - ax), py - ay - t * (by - ay)));
    if (ay > py !== by > py && px < ax + ((py - ay) * (bx - ax)) / (by - ay)) isInside = !isInside;
  }
  return isInside ? best : -best;
}
