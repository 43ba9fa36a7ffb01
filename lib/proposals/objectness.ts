import type { Box } from "@/lib/geometry/types";
import { rank, type Ranker } from "@/lib/vision/ranker";
import { boxOf, type CandidateSet } from "./candidates";
import { suppressInTwo } from "./suppress";
import { OBJECTNESS } from "./weights/objectness";

/** What ranks the candidates of any picture, and turns a rank score into a probability. */
export type ObjectnessWeights = {
  ranker: Ranker;
  /** Probability that a person keeps it = 1 / (1 + exp(-(slope * score + offset))) (Platt, 1999). */
  slope: number;
  offset: number;
};

/** Overlap of what a person sees first, and of what only a long list shows. */
const STRICT_IOU = 0.5;
const LENIENT_IOU = 0.7;
const STRICT_COUNT = 100;

/** Candidates of a picture in the order in which they are proposed, with their scores. */
export function rankCandidates(
  set: Pick<CandidateSet, "count" | "boxes" | "features">,
  limit: number,
  ranker: Ranker = OBJECTNESS.ranker,
): { order: number[]; scores: Float64Array; boxes: Box[] } {
  const scores = rank(ranker, set.features);
  const boxes = Array.from({ length: set.count }, (_, n) => boxOf(set, n));
  const order = suppressInTwo(boxes, scores, {
    strictMax: STRICT_IOU,
    lenientMax: LENIENT_IOU,
    count: STRICT_COUNT,
    limit,
  });
  return { order, scores, boxes };
}

/** Probability that a person keeps a candidate with this score. */
export function keepProbability(score: number, { slope, offset }: ObjectnessWeights = OBJECTNESS): number {
  return 1 / (1 + Math.exp(-(slope * score + offset)));
}
