import { candidatePairsBetween } from "@/lib/geometry/pairs";
import { boundaryThickness } from "@/lib/geometry/boundary";
import { SIZES } from "./averagePrecision";
import { boundaryIouWithTruth, iouWithTruth, shareInside, toComparable, type Comparable } from "./comparable";
import type { JudgedImage } from "./types";

export type ObjectSize = "small" | "medium" | "large";

/** What became of one object or label at one threshold. */
export type Outcome = {
  readonly kind: "hit" | "missed" | "false-alarm";
  readonly classId: number;
  /** Size of the object, or of the label itself for a false alarm. */
  readonly size: ObjectSize;
  /** IoU and boundary IoU of a hit; 0 otherwise. */
  readonly iou: number;
  readonly boundaryIou: number;
};

/** Outcomes of an image: pairs over IoU 0.5, pairs from 0.75 on. */
export type ImageOutcomes = { readonly at50: readonly Outcome[]; readonly at75: readonly Outcome[] };

/** Over one half, so that pixels of one object cannot match twice (Kirillov et al., 2019). */
const PQ_THRESHOLD = 0.5;
const STRICT_THRESHOLD = 0.75;

/** COCO's bounds of small, medium and large (Lin et al., 2014). */
export function sizeOf(areaPx2: number): ObjectSize {
  if (areaPx2 < SIZES.small[1]) return "small";
  return areaPx2 < SIZES.medium[1] ? "medium" : "large";
}

/**
 * Pairs labels with objects of their class, best IoU first, ties by order, each used once. Labels left over that lie for
 * more than half in a crowd of their class are not counted. O(pairs of overlapping boxes).
 */
export function matchImage(image: JudgedImage): ImageOutcomes {
  const { width, height } = image;
  const truth = image.truth.map((object) => toComparable(object.shape, width, height));
  const labels = image.labels.map((label) => toComparable(label.shape, width, height));
  const pairs = candidatePairsBetween(
    labels.map(({ box }) => box),
    truth.map(({ box }) => box),
  )
    .filter(([l, t]) => image.labels[l]?.classId === image.truth[t]?.classId)
    .map(([l, t]) => ({
      l,
      t,
      label: labels[l],
      object: truth[t],
      isCrowd: image.truth[t]?.isCrowd === true,
    }));
  const inCrowd = new Set<number>();
  const ranked: { l: number; t: number; iou: number }[] = [];
  for (const { l, t, label, object, isCrowd } of pairs) {
    if (!label || !object) continue;
    if (isCrowd) {
      if (shareInside(label, object) > 0.5) inCrowd.add(l);
      continue;
    }
    const iou = iouWithTruth(label, object);
    if (iou > 0) ranked.push({ l, t, iou });
  }
  ranked.sort((p, q) => q.iou - p.iou || p.l - q.l || p.t - q.t);
  const boundaries = new Map<number, number>();
  const outcomesAt = (isMatch: (iou: number) => boolean): Outcome[] => {
    const matchOf = new Map<number, { t: number; iou: number }>();
    const taken = new Set<number>();
    for (const { l, t, iou } of ranked) {
      if (!isMatch(iou) || matchOf.has(l) || taken.has(t)) continue;
      matchOf.set(l, { t, iou });
      taken.add(t);
    }
    const outcomes: Outcome[] = [];
    image.labels.forEach(({ classId }, l) => {
      const match = matchOf.get(l);
      const label = labels[l];
      if (!label) return;
      if (match) {
        const key = l * image.truth.length + match.t;
        const boundary = boundaries.get(key) ?? boundaryOf(image, label, truth[match.t]);
        boundaries.set(key, boundary);
        outcomes.push({
          kind: "hit",
          classId,
          size: truthSize(image, truth, match.t),
          iou: match.iou,
          boundaryIou: boundary,
        });
      } else if (!inCrowd.has(l)) {
        outcomes.push({ kind: "false-alarm", classId, size: sizeOf(label.areaPx2), iou: 0, boundaryIou: 0 });
      }
    });
    image.truth.forEach(({ classId, isCrowd }, t) => {
      if (isCrowd || taken.has(t)) return;
      outcomes.push({ kind: "missed", classId, size: truthSize(image, truth, t), iou: 0, boundaryIou: 0 });
    });
    return outcomes;
  };
  return {
    at50: outcomesAt((iou) => iou > PQ_THRESHOLD),
    at75: outcomesAt((iou) => iou >= STRICT_THRESHOLD),
  };
}

function truthSize(image: JudgedImage, truth: readonly Comparable[], t: number): ObjectSize {
  return sizeOf(image.truth[t]?.areaPx2 ?? truth[t]?.areaPx2 ?? 0);
}

function boundaryOf(image: JudgedImage, label: Comparable, object: Comparable | undefined): number {
  if (!object) return 0;
  const { width, height } = image;
  return boundaryIouWithTruth(label, object, boundaryThickness(width, height), width, height);
}
