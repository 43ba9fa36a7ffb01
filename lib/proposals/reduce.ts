import { boxIou, boxIntersectionArea, boxArea } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";
import { hdbscan, meanShiftModes, singleLinkage } from "@/lib/cluster/cluster";
import { byScore, suppress } from "./suppress";

/** Ways to reduce many hits on few objects to one hit an object. */
export const REDUCTIONS = [
  "suppression",
  "soft suppression",
  "facility location",
  "mean shift",
  "single linkage",
  "HDBSCAN",
] as const;
export type Reduction = (typeof REDUCTIONS)[number];

/** What is left: boxes (of the input, or means of several) with scores, best first. */
export type Reduced = { box: Box; score: number; members: number[] };

export type ReductionOptions = {
  /** Overlap from which two hits are one object's, for suppression and linkage. */
  iouMax?: number;
  /** Spread of the decay of soft suppression. */
  sigma?: number;
  /** Window of mean shift, in units of a box's size. */
  bandwidth?: number;
  /** Cost of opening an object, for facility location, in units of score. */
  openingCost?: number;
  clusterSizeMin?: number;
  /** Hits under this score are left out of what is returned. */
  scoreMin?: number;
};

/** Reduces hits by the named method; ties by index, so the answer does not depend on chance. O(n²), mean shift O(n² rounds). */
export function reduceHits(
  method: Reduction,
  boxes: readonly Box[],
  scores: readonly number[],
  options: ReductionOptions = {},
): Reduced[] {
  switch (method) {
    case "suppression":
      return suppress(boxes, scores, options.iouMax ?? 0.5).map((index) => one(boxes, scores, index));
    case "soft suppression":
      return softSuppress(boxes, scores, options);
    case "facility location":
      return facilityLocation(boxes, scores, options);
    case "mean shift":
      return shiftBoxes(boxes, scores, options.bandwidth ?? 0.25);
    case "single linkage":
      return fromLabels(
        boxes,
        scores,
        singleLinkage(boxes.length, iouDistance(boxes), 1 - (options.iouMax ?? 0.5)),
      );
    case "HDBSCAN":
      return fromLabels(
        boxes,
        scores,
        hdbscan(boxes.length, shapeDistance(boxes), { clusterSizeMin: options.clusterSizeMin ?? 3 }),
      );
  }
}

const one = (boxes: readonly Box[], scores: readonly number[], index: number): Reduced => ({
  box: boxes[index]!,
  score: scores[index]!,
  members: [index],
});

/**
 * Soft-NMS with the Gaussian decay (Bodla et al., ICCV 2017): the best hit stays, and the scores of the others fall by
 * exp(-IoU² / sigma), again and again. Returns those still at `scoreMin` or above.
 */
export function softSuppress(
  boxes: readonly Box[],
  scores: readonly number[],
  { sigma = 0.5, scoreMin = 0.001 }: ReductionOptions = {},
): Reduced[] {
  const left = Float64Array.from(scores);
  const isOpen = new Uint8Array(boxes.length).fill(1);
  const kept: Reduced[] = [];
  for (;;) {
    let best = -1;
    for (let n = 0; n < left.length; n++) if (isOpen[n] && (best < 0 || left[n]! > left[best]!)) best = n;
    if (best < 0 || left[best]! < scoreMin) return kept;
    isOpen[best] = 0;
    kept.push({ box: boxes[best]!, score: left[best]!, members: [best] });
    for (let n = 0; n < left.length; n++) {
      if (!isOpen[n]) continue;
      const iou = boxIou(boxes[best]!, boxes[n]!);
      if (iou > 0) left[n]! *= Math.exp((-iou * iou) / sigma);
    }
  }
}

/**
 * Greedy facility location (Barinova, Lempitsky and Kohli, 2012): each hit is explained by at most one opened box, with a
 * gain of its score times how well the box covers it; the box that adds most is opened until none adds more than
 * `openingCost`. Two close objects both open when each explains hits that the other does not.
 */
export function facilityLocation(
  boxes: readonly Box[],
  scores: readonly number[],
  { openingCost = 0.35 }: ReductionOptions = {},
): Reduced[] {
  const n = boxes.length;
  const explained = new Float64Array(n);
  const owner = new Int32Array(n).fill(-1);
  const gainOf = (facility: number, hit: number) => {
    const iou = boxIou(boxes[facility]!, boxes[hit]!);
    return iou < 0.3 ? 0 : scores[hit]! * iou;
  };
  const opened: number[] = [];
  const isOpen = new Uint8Array(n);
  const near = boxes.map((box, facility) =>
    boxes.flatMap((other, hit) => (facility === hit || boxIntersectionArea(box, other) > 0 ? [hit] : [])),
  );
  for (;;) {
    let best = -1;
    let most = openingCost;
    for (let facility = 0; facility < n; facility++) {
      if (isOpen[facility]) continue;
      let gain = 0;
      for (const hit of near[facility]!) gain += Math.max(0, gainOf(facility, hit) - explained[hit]!);
      // A facility is worth no more than its own evidence lets it be.
      gain *= scores[facility]!;
      if (gain > most) [best, most] = [facility, gain];
    }
    if (best < 0) break;
    isOpen[best] = 1;
    opened.push(best);
    for (const hit of near[best]!) {
      const gain = gainOf(best, hit);
      if (gain > explained[hit]!) [explained[hit], owner[hit]] = [gain, best];
    }
  }
  const members = new Map(opened.map((facility) => [facility, [] as number[]]));
  owner.forEach((facility, hit) => members.get(facility)?.push(hit));
  return byScore(opened.map((facility) => scores[facility]!)).map((place) => {
    const facility = opened[place]!;
    return { box: boxes[facility]!, score: scores[facility]!, members: members.get(facility) ?? [facility] };
  });
}

/**
 * Mean shift over centre (in box sizes) and log size, hits weighted by score (Comaniciu and Meer, 2002): every hit climbs to
 * a mode; hits of one mode are one object, whose box is their weighted mean. Close peaks stay apart as long as a
 * valley lies between them.
 */
function shiftBoxes(boxes: readonly Box[], scores: readonly number[], bandwidth: number): Reduced[] {
  if (boxes.length === 0) return [];
  const side = median(boxes.map(([, , w, h]) => Math.sqrt(w * h)));
  const points = boxes.map(([x, y, w, h]) => [
    (x + w / 2) / side,
    (y + h / 2) / side,
    Math.log(w / side) / 2,
    Math.log(h / side) / 2,
  ]);
  return fromLabels(boxes, scores, meanShiftModes(points, scores, bandwidth));
}

const median = (values: readonly number[]) => [...values].sort((a, b) => a - b)[values.length >> 1] ?? 1;

function iouDistance(boxes: readonly Box[]): (i: number, j: number) => number {
  return (i, j) => 1 - boxIou(boxes[i]!, boxes[j]!);
}

/** Distance of centres in sizes of the smaller box, and of log sizes: unlike 1 - IoU it still differs where boxes do not meet. */
function shapeDistance(boxes: readonly Box[]): (i: number, j: number) => number {
  return (i, j) => {
    const [ax, ay, aw, ah] = boxes[i]!;
    const [bx, by, bw, bh] = boxes[j]!;
    const side = Math.sqrt(Math.min(boxArea(boxes[i]!), boxArea(boxes[j]!)));
    const dx = (ax + aw / 2 - bx - bw / 2) / side;
    const dy = (ay + ah / 2 - by - bh / 2) / side;
    return Math.hypot(dx, dy, Math.log(aw / bw) / 2, Math.log(ah / bh) / 2);
  };
}

/** One object a label: the score-weighted mean box with the best score. Noise (-1) stays by itself. */
function fromLabels(boxes: readonly Box[], scores: readonly number[], labels: Int32Array): Reduced[] {
  const groups = new Map<number, number[]>();
  labels.forEach((label, index) => {
    const key = label < 0 ? -1 - index : label;
    const own = groups.get(key);
    if (own) own.push(index);
    else groups.set(key, [index]);
  });
  const reduced = [...groups.values()].map((members): Reduced => {
    let weight = 0;
    const sums = [0, 0, 0, 0];
    let score = 0;
    for (const index of members) {
      const own = Math.max(1e-9, scores[index]!);
      weight += own;
      boxes[index]!.forEach((value, axis) => (sums[axis]! += own * value));
      score = Math.max(score, scores[index]!);
    }
    return {
      box: [sums[0]! / weight, sums[1]! / weight, sums[2]! / weight, sums[3]! / weight],
      score,
      members,
    };
  });
  return reduced.sort((a, b) => b.score - a.score || a.members[0]! - b.members[0]!);
}
