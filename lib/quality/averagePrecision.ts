/** A true object as the COCO evaluation sees it. */
export type EvalTruth = { readonly classId: number; readonly areaPx2: number; readonly isCrowd: boolean };

/** A label with its confidence. */
export type EvalLabel = { readonly classId: number; readonly areaPx2: number; readonly score: number };

/** One image: its objects, its labels, and the IoU of label i with object j (over the label's area for a crowd). */
export type EvalImage = {
  readonly truth: readonly EvalTruth[];
  readonly labels: readonly EvalLabel[];
  readonly iou: (label: number, truth: number) => number;
};

/** The twelve figures of the COCO evaluation, 0..1; undefined where there is no object to find. */
export type CocoFigures = {
  readonly ap: number | undefined;
  readonly ap50: number | undefined;
  readonly ap75: number | undefined;
  readonly apSmall: number | undefined;
  readonly apMedium: number | undefined;
  readonly apLarge: number | undefined;
  readonly ar1: number | undefined;
  readonly ar10: number | undefined;
  readonly ar100: number | undefined;
  readonly arSmall: number | undefined;
  readonly arMedium: number | undefined;
  readonly arLarge: number | undefined;
};

export type AveragePrecision = {
  readonly figures: CocoFigures;
  /** AP over IoU 0.50 to 0.95 of each class, in the order given. */
  readonly perClass: readonly { readonly classId: number; readonly ap: number | undefined }[];
};

/** IoU 0.50, 0.55 .. 0.95 and recall 0, 0.01 .. 1, computed as the reference does, to the bit. */
const IOU_STEP = (0.95 - 0.5) / 9;
const IOU_THRESHOLDS = Array.from({ length: 10 }, (_, i) => (i === 9 ? 0.95 : i * IOU_STEP + 0.5));
const RECALLS = Array.from({ length: 101 }, (_, i) => (i === 100 ? 1 : i * 0.01));
const LABELS_MAX = [1, 10, 100] as const;

/** Bounds of an object's area in px², both ends included. */
export const SIZES = {
  all: [0, 1e10],
  small: [0, 32 ** 2],
  medium: [32 ** 2, 96 ** 2],
  large: [96 ** 2, 1e10],
} as const;
type Size = keyof typeof SIZES;

/**
 * Average precision and recall as the COCO evaluation defines them: labels by falling score claim the best object that
 * is still free at each IoU threshold; crowds and objects of another size are neither hits nor misses; precision is
 * made monotone and read at 101 recalls. Ties in score keep the order of images and labels, as in the reference.
 * Source: Lin et al., 2014, and the reference code of the data set's evaluation. O(labels * objects) per image.
 */
export function averagePrecision(
  images: readonly EvalImage[],
  classIds: readonly number[],
): AveragePrecision {
  const curves = classIds.map((classId) => ({
    classId,
    all: curvesOf(images, classId, "all"),
    small: curvesOf(images, classId, "small"),
    medium: curvesOf(images, classId, "medium"),
    large: curvesOf(images, classId, "large"),
  }));
  const precisions = (size: Size, thresholds: readonly number[]) =>
    mean(curves.flatMap((c) => thresholds.flatMap((t) => c[size][100]?.precision[t] ?? [])));
  const recalls = (size: Size, labelsMax: 1 | 10 | 100) =>
    mean(curves.flatMap((c) => c[size][labelsMax]?.recall ?? []));
  const every = IOU_THRESHOLDS.map((_, t) => t);
  return {
    figures: {
      ap: precisions("all", every),
      ap50: precisions("all", [0]),
      ap75: precisions("all", [5]),
      apSmall: precisions("small", every),
      apMedium: precisions("medium", every),
      apLarge: precisions("large", every),
      ar1: recalls("all", 1),
      ar10: recalls("all", 10),
      ar100: recalls("all", 100),
      arSmall: recalls("small", 100),
      arMedium: recalls("medium", 100),
      arLarge: recalls("large", 100),
    },
    perClass: curves.map((c) => ({ classId: c.classId, ap: mean(c.all[100]?.precision.flat() ?? []) })),
  };
}

function mean(values: readonly number[]): number | undefined {
  return values.length === 0 ? undefined : values.reduce((sum, value) => sum + value, 0) / values.length;
}

/** Precision at each recall and the highest recall, for each IoU threshold. */
type Curve = { readonly precision: readonly (readonly number[])[]; readonly recall: readonly number[] };
type Curves = { readonly [labelsMax in 1 | 10 | 100]: Curve | undefined };

function curvesOf(images: readonly EvalImage[], classId: number, size: Size): Curves {
  const matched = images.map((image) => matchImage(image, classId, size));
  const curve = (labelsMax: number) => curveOf(matched, labelsMax);
  return { 1: curve(LABELS_MAX[0]), 10: curve(LABELS_MAX[1]), 100: curve(LABELS_MAX[2]) };
}

type Matched = {
  /** Objects that count. */
  readonly objectCount: number;
  readonly scores: readonly number[];
  /** For each IoU threshold and label: 1 a hit, 0 a false alarm, -1 not counted. */
  readonly verdicts: readonly Int8Array[];
};

function matchImage(image: EvalImage, classId: number, size: Size): Matched {
  const [areaMin, areaMax] = SIZES[size];
  const isOutside = (areaPx2: number) => areaPx2 < areaMin || areaPx2 > areaMax;
  const objects = image.truth
    .map((object, index) => ({ ...object, index, ignored: object.isCrowd || isOutside(object.areaPx2) }))
    .filter((object) => object.classId === classId)
    .sort((p, q) => Number(p.ignored) - Number(q.ignored));
  const labels = image.labels
    .map((label, index) => ({ ...label, index }))
    .filter((label) => label.classId === classId)
    .sort((p, q) => q.score - p.score)
    .slice(0, LABELS_MAX[2]);
  const ious = labels.map((label) => objects.map((object) => image.iou(label.index, object.index)));
  const verdicts = IOU_THRESHOLDS.map((threshold) => {
    const taken = new Uint8Array(objects.length);
    return Int8Array.from(labels, (label, l) => {
      const best = bestObject(ious[l] ?? [], objects, taken, threshold);
      if (best === undefined) return isOutside(label.areaPx2) ? -1 : 0;
      taken[best] = 1;
      return objects[best]?.ignored ? -1 : 1;
    });
  });
  return {
    objectCount: objects.filter((object) => !object.ignored).length,
    scores: labels.map((label) => label.score),
    verdicts,
  };
}

/** The free object with the highest IoU from the threshold on, the last of equals; objects that count come first. */
function bestObject(
  ious: readonly number[],
  objects: readonly { ignored: boolean; isCrowd: boolean }[],
  taken: Uint8Array,
  threshold: number,
): number | undefined {
  let bestIou = Math.min(threshold, 1 - 1e-10);
  let best: number | undefined;
  for (const [o, object] of objects.entries()) {
    if (taken[o] === 1 && !object.isCrowd) continue;
    if (best !== undefined && object.ignored && !objects[best]?.ignored) break;
    const iou = ious[o] ?? 0;
    if (iou < bestIou) continue;
    bestIou = iou;
    best = o;
  }
  return best;
}

function curveOf(images: readonly Matched[], labelsMax: number): Curve | undefined {
  const objectCount = images.reduce((sum, image) => sum + image.objectCount, 0);
  if (objectCount === 0) return undefined;
  const ranked = images
    .flatMap((image, i) => image.scores.slice(0, labelsMax).map((score, label) => ({ score, i, label })))
    .sort((p, q) => q.score - p.score);
  const precision: number[][] = [];
  const recall: number[] = [];
  for (const t of IOU_THRESHOLDS.keys()) {
    let hits = 0;
    let misses = 0;
    const recalls: number[] = [];
    const precisions: number[] = [];
    for (const { i, label } of ranked) {
      const verdict = images[i]?.verdicts[t]?.[label];
      if (verdict === 1) hits++;
      else if (verdict === 0) misses++;
      recalls.push(hits / objectCount);
      // The smallest number keeps the quotient defined before anything is counted, as in the reference.
      precisions.push(hits / (misses + hits + Number.EPSILON));
    }
    for (let k = precisions.length - 1; k > 0; k--) {
      precisions[k - 1] = Math.max(precisions[k - 1] ?? 0, precisions[k] ?? 0);
    }
    let k = 0;
    precision.push(
      RECALLS.map((wanted) => {
        while (k < recalls.length && (recalls[k] ?? 0) < wanted) k++;
        return precisions[k] ?? 0;
      }),
    );
    recall.push(recalls[recalls.length - 1] ?? 0);
  }
  return { precision, recall };
}
