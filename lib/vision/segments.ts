import type { Lab } from "./lab";

/** A partition of a picture: `label[pixel]` is 0 .. count - 1, numbered in reading order. */
export type Segments = { width: number; height: number; label: Int32Array; count: number };

/** The edges between neighbouring pixels in order of weight. Edge code: 2 * pixel, plus 1 for the edge downwards. */
export type PixelGraph = { width: number; height: number; order: Int32Array; weight: Float32Array };

const WEIGHT_STEPS = 4096;
/** Weights beyond this are all alike: no scale in use joins across them. */
const WEIGHT_MAX = 60;

/**
 * The 4-neighbour graph of a picture, weighted by distance over three planes and sorted by counting (to 1/4096 of
 * `WEIGHT_MAX`). Sorted once, it serves every scale. Eight neighbours were measured: twice the time, no more
 * objects found. O(pixels).
 */
export function pixelGraph(
  width: number,
  height: number,
  planes: readonly [Float32Array, Float32Array, Float32Array],
): PixelGraph {
  const count = width * height;
  const weight = new Float32Array(count * 2).fill(-1);
  const starts = new Int32Array(WEIGHT_STEPS + 1);
  const scale = (WEIGHT_STEPS - 1) / WEIGHT_MAX;
  const [p0, p1, p2] = planes;
  let edges = 0;
  for (let down = 0; down < 2; down++) {
    const step = down ? width : 1;
    const yEnd = height - down;
    const xEnd = width - 1 + down;
    for (let y = 0; y < yEnd; y++) {
      for (let x = 0, i = y * width; x < xEnd; x++, i++) {
        const j = i + step;
        const d0 = p0[i]! - p0[j]!;
        const d1 = p1[i]! - p1[j]!;
        const d2 = p2[i]! - p2[j]!;
        const w = Math.min(WEIGHT_MAX, Math.sqrt(d0 * d0 + d1 * d1 + d2 * d2));
        weight[2 * i + down] = w;
        starts[((weight[2 * i + down]! * scale) | 0) + 1]!++;
        edges++;
      }
    }
  }
  for (let step = 0; step < WEIGHT_STEPS; step++) starts[step + 1]! += starts[step]!;
  const order = new Int32Array(edges);
  for (let code = 0; code < weight.length; code++) {
    const w = weight[code]!;
    if (w >= 0) order[starts[(w * scale) | 0]!++] = code;
  }
  return { width, height, order, weight };
}

/**
 * Graph segmentation (Felzenszwalb and Huttenlocher, IJCV 2004): two components join when the lightest edge between
 * them is no heavier than the heaviest inside either plus k / size. Then components under `sizeMin` px join
 * across their lightest edge. O(pixels).
 */
export function segmentGraph(
  { width, height, order, weight }: PixelGraph,
  k: number,
  sizeMin: number,
): Segments {
  const count = width * height;
  const parent = new Int32Array(count);
  for (let i = 0; i < count; i++) parent[i] = i;
  const size = new Int32Array(count).fill(1);
  const limit = new Float32Array(count).fill(k);
  // Edges that joined nothing are the only ones that the second pass needs to see.
  const refused = new Int32Array(order.length);
  let refusedCount = 0;
  for (let n = 0; n < order.length; n++) {
    const code = order[n]!;
    const w = weight[code]!;
    let p = code >> 1;
    let q = code & 1 ? p + width : p + 1;
    while (parent[p] !== p) p = parent[p] = parent[parent[p]!]!;
    while (parent[q] !== q) q = parent[q] = parent[parent[q]!]!;
    if (p === q) continue;
    if (w > limit[p]! || w > limit[q]!) {
      refused[refusedCount++] = code;
      continue;
    }
    if (size[p]! < size[q]!) {
      const swap = p;
      p = q;
      q = swap;
    }
    parent[q] = p;
    size[p]! += size[q]!;
    limit[p] = w + k / size[p]!;
  }
  for (let n = 0; n < refusedCount; n++) {
    const code = refused[n]!;
    let p = code >> 1;
    let q = code & 1 ? p + width : p + 1;
    while (parent[p] !== p) p = parent[p] = parent[parent[p]!]!;
    while (parent[q] !== q) q = parent[q] = parent[parent[q]!]!;
    if (p === q || (size[p]! >= sizeMin && size[q]! >= sizeMin)) continue;
    parent[q] = p;
    size[p]! += size[q]!;
  }
  const label = new Int32Array(count);
  const names = new Int32Array(count).fill(-1);
  let named = 0;
  for (let i = 0; i < count; i++) {
    let root = i;
    while (parent[root] !== root) root = parent[root]!;
    parent[i] = root;
    if (names[root]! < 0) names[root] = named++;
    label[i] = names[root]!;
  }
  return { width, height, label, count: named };
}

/** `segmentGraph` of a Lab picture at one scale. */
export function segment(lab: Lab, k: number, sizeMin: number): Segments {
  return segmentGraph(pixelGraph(lab.width, lab.height, [lab.l, lab.a, lab.b]), k, sizeMin);
}
