import type { Box } from "@/lib/geometry/types";
import { gradientOf } from "@/lib/vision/gradient";
import { blurLab, toLab, type Lab } from "@/lib/vision/lab";
import type { Raster } from "@/lib/vision/raster";
import { pixelGraph, segmentGraph, type PixelGraph, type Segments } from "@/lib/vision/segments";
import { BOX_FEATURES, boxContext, boxFeatures, type BoxContext, type Frame } from "./boxFeatures";
import {
  DIRECTIONS,
  groupSegments,
  leavesFrom,
  pixelBins,
  REGION_FEATURES,
  type Hierarchy,
  type Likeness,
} from "./hierarchy";

/** Side at which a picture is segmented, px. */
export const WORK_SIDE_PX = 416;
/** Scales of the segmentation: a small k finds small parts, a large one whole things. */
const SCALES = [8, 25, 80] as const;
const LIKENESSES: readonly Likeness[] = ["appearance", "border"];
/** Smaller segments join a neighbour, px² of the small copy. */
const SEGMENT_MIN_PX2 = 8;
const SEGMENTS_MAX = 2200;
const SET_FEATURES = 7;
export const FEATURES = REGION_FEATURES + BOX_FEATURES + SET_FEATURES;
/** Boxes under this are noise of the segmentation, px of the small copy. */
const SIDE_MIN_PX = 4;

/** Boxes (half-open px ranges of the small copy) that may hold an object, each with the region behind it. */
export type CandidateSet = {
  width: number;
  height: number;
  lab: Lab;
  context: BoxContext;
  segmentations: readonly Segments[];
  hierarchies: readonly Hierarchy[];
  count: number;
  boxes: Int32Array;
  hierarchy: Uint8Array;
  node: Int32Array;
  /** count x FEATURES. */
  features: Float32Array;
};

/**
 * Every region of a picture over three scales and two ways of grouping, with what its border, its box and the other
 * candidates say about it. Equal boxes are one candidate: the region with the strongest border stands for them. `frame`
 * is the whole picture, in px of `small`, where that is only a tile of it. Deterministic. O(pixels + candidates²).
 */
export function candidates(
  small: Raster,
  frame: Frame = { left: 0, top: 0, width: small.width, height: small.height },
  scales: readonly number[] = SCALES,
): CandidateSet {
  const { width, height } = small;
  const lab = blurLab(toLab(small));
  const gradient = gradientOf(lab, DIRECTIONS);
  const graph = pixelGraph(width, height, [lab.l, lab.a, lab.b]);
  const segmentations = scales.map((k) => segmentsUpTo(graph, k));
  const bins = pixelBins(lab, gradient);
  const hierarchies = segmentations.flatMap((segments) => {
    const leaves = leavesFrom(segments, lab, gradient, bins);
    return LIKENESSES.map((likeness) => groupSegments(leaves, likeness));
  });
  const context = boxContext(lab, segmentations, frame, gradient);

  const found = new Map<number, { hierarchy: number; node: number; times: number }>();
  const inOrder: number[] = [];
  hierarchies.forEach((tree, index) => {
    for (let node = 0; node < tree.count; node++) {
      const [l, t, r, b] = [tree.left[node]!, tree.top[node]!, tree.right[node]!, tree.bottom[node]!];
      if (r - l < SIDE_MIN_PX || b - t < SIDE_MIN_PX || (r - l === width && b - t === height)) continue;
      const key = ((l * 1024 + t) * 1024 + r) * 1024 + b;
      const known = found.get(key);
      if (!known) {
        found.set(key, { hierarchy: index, node, times: 1 });
        inOrder.push(key);
        continue;
      }
      known.times += 1;
      const rival = hierarchies[known.hierarchy]!;
      if (tree.features[node * REGION_FEATURES]! > rival.features[known.node * REGION_FEATURES]!) {
        known.hierarchy = index;
        known.node = node;
      }
    }
  });
  const count = inOrder.length;
  const boxes = new Int32Array(count * 4);
  const hierarchy = new Uint8Array(count);
  const nodes = new Int32Array(count);
  const features = new Float32Array(count * FEATURES);
  inOrder.forEach((key, n) => {
    const entry = found.get(key)!;
    const tree = hierarchies[entry.hierarchy]!;
    const { node } = entry;
    boxes.set([tree.left[node]!, tree.top[node]!, tree.right[node]!, tree.bottom[node]!], n * 4);
    hierarchy[n] = entry.hierarchy;
    nodes[n] = node;
    const at = n * FEATURES;
    features.set(tree.features.subarray(node * REGION_FEATURES, (node + 1) * REGION_FEATURES), at);
    boxFeatures(
      context,
      tree.left[node]!,
      tree.top[node]!,
      tree.right[node]!,
      tree.bottom[node]!,
      features,
      at + REGION_FEATURES,
    );
    features[at + FEATURES - 1] = Math.log2(entry.times);
    features[at + FEATURES - 2] = node < tree.leaves ? 1 : 0;
  });
  companions(boxes, count, features);
  return {
    width,
    height,
    lab,
    context,
    segmentations,
    hierarchies,
    count,
    boxes,
    hierarchy,
    node: nodes,
    features,
  };
}

/** Noise falls into any number of segments: small ones are joined until few enough are left. */
function segmentsUpTo(graph: PixelGraph, k: number): Segments {
  for (let sizeMin = SEGMENT_MIN_PX2; ; sizeMin *= 2) {
    const segments = segmentGraph(graph, k, sizeMin);
    if (segments.count <= SEGMENTS_MAX) return segments;
  }
}

/** How many other candidates nearly agree with each box, lie within it, or hold it. */
function companions(boxes: Int32Array, count: number, features: Float32Array): void {
  const same = new Int32Array(count);
  const near = new Int32Array(count);
  const within = new Int32Array(count);
  const around = new Int32Array(count);
  const area = Float64Array.from(
    { length: count },
    (_, n) => (boxes[n * 4 + 2]! - boxes[n * 4]!) * (boxes[n * 4 + 3]! - boxes[n * 4 + 1]!),
  );
  const order = Int32Array.from({ length: count }, (_, n) => n).sort(
    (p, q) => boxes[p * 4]! - boxes[q * 4]! || p - q,
  );
  for (let i = 0; i < count; i++) {
    const p = order[i]!;
    const t = boxes[p * 4 + 1]!;
    const r = boxes[p * 4 + 2]!;
    const b = boxes[p * 4 + 3]!;
    const own = area[p]!;
    for (let j = i + 1; j < count; j++) {
      const q = order[j]!;
      const ql = boxes[q * 4]!;
      if (ql >= r) break;
      const top = boxes[q * 4 + 1]!;
      const bottom = boxes[q * 4 + 3]!;
      if (top >= b || bottom <= t) continue;
      const qr = boxes[q * 4 + 2]!;
      const common = ((qr < r ? qr : r) - ql) * ((bottom < b ? bottom : b) - (top > t ? top : t));
      const other = area[q]!;
      const union = own + other - common;
      if (common > 0.6 * union) {
        near[p]!++;
        near[q]!++;
        if (common > 0.85 * union) {
          same[p]!++;
          same[q]!++;
        }
      } else if (common > 0.9 * (own < other ? own : other)) {
        within[own < other ? q : p]!++;
        around[own < other ? p : q]!++;
      }
    }
  }
  for (let n = 0; n < count; n++) {
    const at = n * FEATURES + REGION_FEATURES + BOX_FEATURES;
    features[at] = Math.log2(1 + same[n]!);
    features[at + 1] = Math.log2(1 + near[n]!);
    features[at + 2] = Math.log2(1 + within[n]!);
    features[at + 3] = Math.log2(1 + around[n]!);
    features[at + 4] = same[n]! / (near[n]! + 1);
  }
}

export function boxOf({ boxes }: Pick<CandidateSet, "boxes">, n: number): Box {
  const l = boxes[n * 4]!;
  const t = boxes[n * 4 + 1]!;
  return [l, t, boxes[n * 4 + 2]! - l, boxes[n * 4 + 3]! - t];
}
