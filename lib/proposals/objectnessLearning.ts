import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";
import { fitRanker, seeded, type Ranker } from "@/lib/vision/ranker";
import { boxOf, FEATURES, type CandidateSet } from "./candidates";
import { fitLogistic } from "./logistic";
import { rankCandidates, type ObjectnessWeights } from "./objectness";

/** The candidates of a picture and its true boxes, px of the small copy; of the rest only what learning needs. */
export type LearningPicture = {
  set: Pick<CandidateSet, "count" | "boxes" | "features">;
  truth: readonly { box: Box; isLarge: boolean }[];
};

/** IoU from which a candidate counts as the object. */
const RIGHT_IOU = 0.5;
const NEGATIVE_SHARE = 0.12;
const POSITIVE_WEIGHT = 0.35;

/** Learns the ranking: every object weighs nearly the same, however many candidates meet it. Deterministic. */
export function learnRanker(pictures: readonly LearningPicture[]): Ranker {
  const random = seeded(7);
  const rows: { picture: LearningPicture; n: number; isRight: boolean; weight: number }[] = [];
  for (const picture of pictures) {
    const { set, truth } = picture;
    const owner = new Int32Array(set.count).fill(-1);
    const hits = new Int32Array(truth.length);
    for (let n = 0; n < set.count; n++) {
      const box = boxOf(set, n);
      let best = RIGHT_IOU;
      truth.forEach((entry, index) => {
        const iou = boxIou(box, entry.box);
        if (iou >= best) [best, owner[n]] = [iou, index];
      });
      if (owner[n]! >= 0) hits[owner[n]!]! += 1;
    }
    for (let n = 0; n < set.count; n++) {
      const own = owner[n]!;
      if (own >= 0) rows.push({ picture, n, isRight: true, weight: 1 / Math.sqrt(hits[own]!) });
      else if (random() < NEGATIVE_SHARE) rows.push({ picture, n, isRight: false, weight: 1 });
    }
  }
  const sum = (isRight: boolean) =>
    rows.reduce((total, row) => total + (row.isRight === isRight ? row.weight : 0), 0);
  const [right, wrong] = [sum(true), sum(false)];
  const features = new Float32Array(rows.length * FEATURES);
  rows.forEach(({ picture, n }, index) =>
    features.set(picture.set.features.subarray(n * FEATURES, (n + 1) * FEATURES), index * FEATURES),
  );
  return fitRanker(
    {
      features,
      target: Float32Array.from(rows, ({ isRight }) => (isRight ? 1 : 0)),
      weight: Float32Array.from(rows, ({ isRight, weight }) =>
        isRight ? (weight / right) * POSITIVE_WEIGHT : (weight / wrong) * (1 - POSITIVE_WEIGHT),
      ),
    },
    FEATURES,
    { hidden: 16, networks: 2, epochs: 5, rate: 0.004, decay: 0.01, seed: 3 },
  );
}

/** A proposal's score, and whether it is the first to meet an object that none before it met. */
export type Outcome = { score: number; isKept: boolean };

export function outcomesOf(
  { set, truth }: LearningPicture,
  ranker: Ranker,
  limit: number,
): { outcomes: Outcome[]; boxes: Box[] } {
  const { order, scores, boxes } = rankCandidates(set, limit, ranker);
  const met = new Set<number>();
  const outcomes = order.map((n): Outcome => {
    let best = RIGHT_IOU;
    let own = -1;
    truth.forEach((entry, index) => {
      const iou = met.has(index) ? 0 : boxIou(boxes[n]!, entry.box);
      if (iou >= best) [best, own] = [iou, index];
    });
    if (own >= 0) met.add(own);
    return { score: scores[n]!, isKept: own >= 0 };
  });
  return { outcomes, boxes: order.map((n) => boxes[n]!) };
}

/** Platt's two numbers from outcomes of rankings that had not seen the picture. */
export function calibrate(outcomes: readonly Outcome[]): Pick<ObjectnessWeights, "slope" | "offset"> {
  const [offset = 0, slope = 1] = fitLogistic(
    outcomes.map(({ score, isKept }) => ({ features: [1, score], positive: isKept, weight: 1 })),
    1e-3,
    40,
  );
  return { slope, offset };
}
