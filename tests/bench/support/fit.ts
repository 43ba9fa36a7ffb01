import { judgeImage } from "@/lib/consensus/mergeImage";
import { iouTerms } from "@/lib/consensus/predict";
import { estimateReliability } from "@/lib/consensus/reliability";
import { regionIou, spansOf } from "@/lib/consensus/spans";
import { DEFAULT_SETTINGS } from "@/lib/consensus/types";
import { batchOf, type SceneKind } from "./batches";

const NAMES = ["constant", "pair", "count", "people", "size", "raggedness"] as const;
const IMAGES = 10;
const STEPS = 25;
/** Pull of each weight to zero, so that terms that go together do not run apart. */
const RIDGE = 1e-3;

export type FittedIou = { weights: Record<(typeof NAMES)[number], number>; count: number; error: number };

/**
 * Fractional logistic regression (Papke and Wooldridge, 1996) of the true IoU of agreed outlines on the terms of
 * predict.ts, by Newton's method. Objects without a true one beside them (IoU up to 0.3) are left to the votes.
 */
export function fitPredictedIou(kinds: readonly SceneKind[], seeds: readonly number[]): FittedIou {
  const rows: number[][] = [];
  const ious: number[] = [];
  for (const kind of kinds)
    for (const annotators of [2, 3, 5]) for (const seed of seeds) collect(kind, annotators, seed, rows, ious);
  let weights = NAMES.map(() => 0);
  for (let step = 0; step < STEPS; step++) weights = newton(rows, ious, weights);
  const error =
    rows.reduce((sum, row, k) => sum + Math.abs(expit(row, weights) - ious[k]!), 0) /
    Math.max(1, rows.length);
  const [constant = 0, pair = 0, count = 0, people = 0, size = 0, raggedness = 0] = weights;
  return { weights: { constant, pair, count, people, size, raggedness }, count: rows.length, error };
}

function collect(kind: SceneKind, annotators: number, seed: number, rows: number[][], ious: number[]): void {
  const { scenes, labels } = batchOf(kind, seed, annotators, { images: IMAGES });
  const reliability = estimateReliability(labels);
  labels.forEach((image, k) => {
    const truth = scenes[k]!.objects.map(({ rings }) => spansOf({ kind: "polygon", rings }));
    for (const { fused, fusion } of judgeImage(image, DEFAULT_SETTINGS, reliability).judged) {
      if (!fused) continue;
      const spans = spansOf(fused.shape);
      const best = Math.max(0, ...truth.map((object) => regionIou(spans, object)));
      if (best <= 0.3) continue;
      rows.push(iouTerms(fusion));
      ious.push(best);
    }
  });
}

function expit(row: readonly number[], weights: readonly number[]): number {
  return 1 / (1 + Math.exp(-row.reduce((sum, term, t) => sum + term * weights[t]!, 0)));
}

function newton(rows: readonly number[][], ious: readonly number[], weights: readonly number[]): number[] {
  const size = weights.length;
  const matrix = weights.map((weight, t) => [
    ...weights.map((_, u) => (t === u ? RIDGE : 0)),
    -RIDGE * weight,
  ]);
  rows.forEach((row, k) => {
    const p = expit(row, weights);
    for (let t = 0; t < size; t++) {
      for (let u = 0; u < size; u++) matrix[t]![u]! += p * (1 - p) * row[t]! * row[u]!;
      matrix[t]![size]! += (ious[k]! - p) * row[t]!;
    }
  });
  const step = solved(matrix);
  return weights.map((weight, t) => weight + step[t]!);
}

/** Gauss and Jordan, with the largest pivot. */
function solved(matrix: number[][]): number[] {
  const size = matrix.length;
  for (let column = 0; column < size; column++) {
    let pivot = column;
    for (let r = column + 1; r < size; r++)
      if (Math.abs(matrix[r]![column]!) > Math.abs(matrix[pivot]![column]!)) pivot = r;
    [matrix[column], matrix[pivot]] = [matrix[pivot]!, matrix[column]!];
    for (let r = 0; r < size; r++) {
      if (r === column) continue;
      const factor = matrix[r]![column]! / matrix[column]![column]!;
      for (let c = column; c <= size; c++) matrix[r]![c]! -= factor * matrix[column]![c]!;
    }
  }
  return matrix.map((row, t) => row[size]! / row[t]!);
}
