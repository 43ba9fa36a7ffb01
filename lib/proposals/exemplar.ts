import { boxIou } from "@/lib/geometry/box";
import type { Box, Rings } from "@/lib/geometry/types";
import type { Raster } from "@/lib/vision/raster";
import { boxOfRegion, candidates, objectness, shrink, WORK_SIDE_PX, type Candidate } from "./candidates";
import { fitLogistic, type Example } from "./logistic";
import { suppress } from "./suppress";

export type ExemplarImage = {
  raster: Raster;
  instances: readonly { classId: string; box: Box; rings?: Rings }[];
};

/** What a batch's own settled labels taught: logistic weights of each class. Plain data: it survives JSON. */
export type ExemplarModel = {
  version: 1;
  classes: { classId: string; weights: number[]; examples: number }[];
  /** Mean over classes of average precision at IoU 0.5 on images it was not trained on; null with one image. */
  apWith: number | null;
  /** The same for the class-agnostic ranking, with the class taken as known. */
  apWithout: number | null;
  useful: boolean;
};

const RIGHT_IOU = 0.5;
const WRONG_IOU = 0.35;
/** Negatives of an image: the hardest by objectness, and every n-th of the rest. */
const HARD_NEGATIVES = 60;
const EASY_STEP = 9;
const RIDGE = 3;
const POSITIVE_WEIGHT = 4;
/** A model is used only when it gains this much average precision on images it has not seen. */
const GAIN_MIN = 0.02;

type Prepared = {
  found: Candidate[];
  boxes: Box[];
  vectors: number[][];
  truth: { classId: string; box: Box }[];
};

/** Region features joined with colour, size and shape: what makes one class differ from another. */
export function exemplarFeatures({ region, features }: Candidate, side: number): number[] {
  const w = region.right - region.left + 1;
  const h = region.bottom - region.top + 1;
  const size = Math.log2(Math.sqrt(w * h) / side + 1e-6) + 4;
  const aspect = Math.log2(w / h);
  return [
    ...features,
    ...[...region.histogram].map((value) => Math.sqrt(value) * 2),
    size / 2,
    (size * size) / 8,
    aspect,
    aspect * aspect,
  ];
}

function prepare({ raster, instances }: ExemplarImage): Prepared {
  const small = shrink(raster, WORK_SIDE_PX);
  const sx = small.width / raster.width;
  const sy = small.height / raster.height;
  const found = candidates(small);
  const side = Math.max(small.width, small.height);
  return {
    found,
    boxes: found.map(({ region }) => boxOfRegion(region)),
    vectors: found.map((candidate) => exemplarFeatures(candidate, side)),
    truth: instances.map(({ classId, box: [x, y, w, h] }) => ({
      classId,
      box: [x * sx, y * sy, w * sx, h * sy],
    })),
  };
}

function examplesOf({ found, boxes, vectors, truth }: Prepared, classId: string): Example[] {
  const own = truth.filter((entry) => entry.classId === classId);
  const best = boxes.map((box) => own.reduce((most, entry) => Math.max(most, boxIou(box, entry.box)), 0));
  const hard = new Set(
    found
      .map(({ features }, index) => ({ index, score: objectness(features) }))
      .filter(({ index }) => (best[index] ?? 0) < WRONG_IOU)
      .sort((a, b) => b.score - a.score || a.index - b.index)
      .slice(0, HARD_NEGATIVES)
      .map(({ index }) => index),
  );
  return found.flatMap((_, index): Example[] => {
    const iou = best[index] ?? 0;
    const features = vectors[index] ?? [];
    if (iou >= RIGHT_IOU) return [{ features, positive: true, weight: POSITIVE_WEIGHT * iou }];
    if (iou < WRONG_IOU && (hard.has(index) || index % EASY_STEP === 0))
      return [{ features, positive: false, weight: 1 }];
    return [];
  });
}

function fit(images: readonly Prepared[]): ExemplarModel["classes"] {
  const classIds = [...new Set(images.flatMap((image) => image.truth.map((entry) => entry.classId)))].sort();
  return classIds.flatMap((classId) => {
    const examples = images.flatMap((image) => examplesOf(image, classId));
    const positives = examples.filter((example) => example.positive).length;
    if (positives < 2) return [];
    return [{ classId, weights: fitLogistic(examples, RIDGE), examples: positives }];
  });
}

/** Candidates scored by a model: for each its best class and probability. */
export function scoreExemplars(
  model: Pick<ExemplarModel, "classes">,
  found: readonly Candidate[],
  side: number,
): { classId: string; score: number }[] {
  return found.map((candidate) => bestClass(model.classes, exemplarFeatures(candidate, side)));
}

function bestClass(
  classes: ExemplarModel["classes"],
  vector: readonly number[],
): { classId: string; score: number } {
  let best = { classId: "", score: 0 };
  for (const { classId, weights } of classes) {
    const score = objectness(vector, weights);
    if (score > best.score) best = { classId, score };
  }
  return best;
}

/** Average precision at IoU 0.5 of ranked boxes, as the area under the precision envelope (all points). */
export function averagePrecision(
  ranked: readonly { image: number; box: Box; score: number }[],
  truth: readonly { image: number; box: Box }[],
): number {
  if (truth.length === 0) return 0;
  const taken = new Set<number>();
  const hits = [...ranked]
    .sort((a, b) => b.score - a.score)
    .map(({ image, box }) => {
      let best = -1;
      let bestIou = RIGHT_IOU;
      truth.forEach((entry, index) => {
        const iou = entry.image === image && !taken.has(index) ? boxIou(box, entry.box) : 0;
        if (iou >= bestIou) [best, bestIou] = [index, iou];
      });
      if (best >= 0) taken.add(best);
      return best >= 0;
    });
  let right = 0;
  const precision = hits.map((hit, index) => (right += hit ? 1 : 0) / (index + 1));
  for (let i = precision.length - 2; i >= 0; i--) precision[i] = Math.max(precision[i]!, precision[i + 1]!);
  return hits.reduce((sum, hit, index) => sum + (hit ? precision[index]! : 0), 0) / truth.length;
}

const IOU_MAX = 0.5;
const RANKED_MAX = 100;

function rank(image: number, { boxes }: Prepared, scores: readonly number[]) {
  return suppress(boxes, scores, IOU_MAX, RANKED_MAX).map((index) => ({
    image,
    box: boxes[index]!,
    score: scores[index]!,
  }));
}

/**
 * Learns from a batch's settled images: for each class a logistic model over region features, colour, size
 * and shape, with hard negatives. Measured by cross-validation over images (five folds at most) against the
 * class-agnostic ranking; `useful` says whether it wins. Deterministic.
 */
export function trainExemplars(images: readonly ExemplarImage[]): ExemplarModel {
  const prepared = images.map(prepare);
  const classes = fit(prepared);
  const folds = Math.min(5, prepared.length);
  if (folds < 2) return { version: 1, classes, apWith: null, apWithout: null, useful: classes.length > 0 };
  const withModel: Map<string, { image: number; box: Box; score: number }[]> = new Map();
  const agnostic: { image: number; box: Box; score: number }[] = [];
  for (let fold = 0; fold < folds; fold++) {
    const model = fit(prepared.filter((_, index) => index % folds !== fold));
    prepared.forEach((image, index) => {
      if (index % folds !== fold) return;
      agnostic.push(
        ...rank(
          index,
          image,
          image.found.map(({ features }) => objectness(features)),
        ),
      );
      for (const { classId, weights } of model) {
        const scores = image.vectors.map((vector) => objectness(vector, weights));
        withModel.set(classId, [...(withModel.get(classId) ?? []), ...rank(index, image, scores)]);
      }
    });
  }
  const truth = prepared.flatMap((image, index) => image.truth.map((entry) => ({ image: index, ...entry })));
  const classIds = [...new Set(truth.map((entry) => entry.classId))];
  const mean = (of: (classId: string) => number) =>
    classIds.reduce((sum, classId) => sum + of(classId), 0) / Math.max(1, classIds.length);
  const own = (classId: string) => truth.filter((entry) => entry.classId === classId);
  const apWith = mean((classId) => averagePrecision(withModel.get(classId) ?? [], own(classId)));
  const apWithout = mean((classId) => averagePrecision(agnostic, own(classId)));
  return {
    version: 1,
    classes,
    apWith,
    apWithout,
    useful: classes.length > 0 && apWith >= apWithout + GAIN_MIN,
  };
}
