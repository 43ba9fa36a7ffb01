/** Counts of one class (or of any group of objects) from which panoptic quality follows. */
export type PanopticCounts = {
  readonly truePositives: number;
  readonly falsePositives: number;
  readonly falseNegatives: number;
  /** Sum of IoU over the matched pairs. */
  readonly iouSum: number;
};

export type PanopticQuality = { readonly pq: number; readonly sq: number; readonly rq: number };

/**
 * Panoptic quality of one class: PQ = SQ * RQ, where SQ is the mean IoU of the matches and RQ their F1. Undefined where
 * there is neither object nor label. Source: Kirillov et al., CVPR 2019.
 */
export function panopticQuality(counts: PanopticCounts): PanopticQuality | undefined {
  const { truePositives: tp, falsePositives: fp, falseNegatives: fn, iouSum } = counts;
  if (tp + fp + fn === 0) return undefined;
  const sq = tp === 0 ? 0 : iouSum / tp;
  const rq = tp / (tp + fp / 2 + fn / 2);
  return { pq: iouSum / (tp + fp / 2 + fn / 2), sq, rq };
}

/** The mean over the classes that occur; undefined where none does. */
export function meanPanopticQuality(classes: readonly PanopticCounts[]): PanopticQuality | undefined {
  const values = classes.flatMap((counts) => panopticQuality(counts) ?? []);
  if (values.length === 0) return undefined;
  const mean = (pick: (value: PanopticQuality) => number) =>
    values.reduce((sum, value) => sum + pick(value), 0) / values.length;
  return { pq: mean((v) => v.pq), sq: mean((v) => v.sq), rq: mean((v) => v.rq) };
}

/** One side's segment of an image, as pixels of one class. */
export type SegmentOverlap = {
  /** Pixels in common; 0 for segments that do not meet. */
  readonly common: (label: number, truth: number) => number;
  /** Pixels of the label that the truth leaves undecided. */
  readonly undecided: (label: number) => number;
};

export type TruthSegment = { readonly classId: number; readonly areaPx: number; readonly isCrowd: boolean };
export type LabelSegment = { readonly classId: number; readonly areaPx: number };

/**
 * Counts per class of an image in which every pixel belongs to at most one segment a side, as in panoptic segmentation:
 * a pair matches where its IoU, without the undecided pixels, is over one half (so no pixel can match twice);
 * labels that lie for more than half in undecided pixels or in a crowd of their class do not count.
 * Source: Kirillov et al., CVPR 2019, and its reference code.
 */
export function panopticCounts(
  truth: readonly TruthSegment[],
  labels: readonly LabelSegment[],
  overlap: SegmentOverlap,
): ReadonlyMap<number, PanopticCounts> {
  const tallies = new Map<number, { -readonly [key in keyof PanopticCounts]: PanopticCounts[key] }>();
  const tally = (classId: number) => {
    const found = tallies.get(classId) ?? {
      truePositives: 0,
      falsePositives: 0,
      falseNegatives: 0,
      iouSum: 0,
    };
    tallies.set(classId, found);
    return found;
  };
  const found = new Set<number>();
  const isMatched = labels.map((label, l) => {
    for (const [t, object] of truth.entries()) {
      if (object.isCrowd || object.classId !== label.classId) continue;
      const common = overlap.common(l, t);
      const iou = common / (label.areaPx + object.areaPx - common - overlap.undecided(l));
      if (!(iou > 0.5)) continue;
      tally(label.classId).truePositives++;
      tally(label.classId).iouSum += iou;
      found.add(t);
      return true;
    }
    return false;
  });
  for (const [t, object] of truth.entries()) {
    if (!object.isCrowd && !found.has(t)) tally(object.classId).falseNegatives++;
  }
  for (const [l, label] of labels.entries()) {
    if (isMatched[l]) continue;
    const inCrowds = truth.reduce(
      (sum, object, t) =>
        sum + (object.isCrowd && object.classId === label.classId ? overlap.common(l, t) : 0),
      0,
    );
    if ((overlap.undecided(l) + inCrowds) / label.areaPx > 0.5) continue;
    tally(label.classId).falsePositives++;
  }
  return tallies;
}
