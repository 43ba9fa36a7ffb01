import { averagePrecision, type AveragePrecision, type EvalImage } from "./averagePrecision";
import { bootstrapIntervals } from "./bootstrap";
import { cocoBoxIou, cocoRuns } from "./cocoIou";
import { toComparable } from "./comparable";
import { matchImage, type ImageOutcomes, type Outcome } from "./match";
import { meanPanopticQuality, panopticQuality, type PanopticCounts } from "./panoptic";
import { rleIou, type RleRuns } from "@/lib/geometry/rle";
import type { Detection, Intervals, JudgedImage, Quality, QualityReport } from "./types";

export type MeasureOptions = {
  readonly bootstrapRounds?: number;
  readonly seed?: number;
  /** Called after each image and each step, with the work done so far and in all. */
  readonly onProgress?: (done: number, all: number) => void;
};

/**
 * Quality of labels against truth: panoptic quality (Kirillov et al., 2019), detection at IoU over 0.5 and from 0.75 on,
 * mean IoU and boundary IoU (Cheng et al., 2021) of the matches, and average precision as in the COCO
 * evaluation (Lin et al., 2014), overall, per class and per size, with 95 % bootstrap intervals over images. The same
 * input gives the same report. O(images * overlapping pairs) plus the bootstrap.
 */
export function measureQuality(images: readonly JudgedImage[], options: MeasureOptions = {}): QualityReport {
  const { bootstrapRounds = 1000, seed = 1, onProgress } = options;
  const steps = images.length + 2;
  const outcomes = images.map((image, i) => {
    const matched = matchImage(image);
    onProgress?.(i + 1, steps);
    return matched;
  });
  const classIds = [
    ...new Set(images.flatMap((image) => [...image.truth, ...image.labels].map((l) => l.classId))),
  ].sort((p, q) => p - q);
  const box = precisionOf(images, classIds, "box");
  onProgress?.(images.length + 1, steps);
  const mask = precisionOf(images, classIds, "mask");
  onProgress?.(steps, steps);
  const perSize = (size: Outcome["size"]) => qualityOf(outcomes, (outcome) => outcome.size === size);
  return {
    images: images.length,
    overall: qualityOf(outcomes, () => true, true),
    intervals: intervalsOf(outcomes, classIds, bootstrapRounds, seed),
    perClass: classIds.map((classId) => ({
      classId,
      ...qualityOf(outcomes, (outcome) => outcome.classId === classId),
    })),
    perSize: { small: perSize("small"), medium: perSize("medium"), large: perSize("large") },
    ap: { box, mask },
  };
}

function precisionOf(
  images: readonly JudgedImage[],
  classIds: readonly number[],
  kind: "box" | "mask",
): AveragePrecision {
  return averagePrecision(images.map(kind === "box" ? boxEval : maskEval), classIds);
}

function boxEval({ width, height, truth, labels }: JudgedImage): EvalImage {
  const objects = truth.map((object) => ({
    ...object,
    comparable: toComparable(object.shape, width, height),
  }));
  const drawn = labels.map((label) => ({ ...label, box: toComparable(label.shape, width, height).box }));
  return {
    truth: objects.map(({ classId, areaPx2, comparable, isCrowd }) => ({
      classId,
      areaPx2: areaPx2 ?? comparable.areaPx2,
      isCrowd: isCrowd === true,
    })),
    labels: drawn.map(({ classId, box, score }) => ({
      classId,
      areaPx2: box[2] * box[3],
      score: score ?? 1,
    })),
    iou: (l, t) => {
      const [label, object] = [drawn[l], objects[t]];
      return label && object ? cocoBoxIou(label.box, object.comparable.box, object.isCrowd === true) : 0;
    },
  };
}

function maskEval({ width, height, truth, labels }: JudgedImage): EvalImage {
  const objects = truth.map((object) => ({ ...object, runs: cocoRuns(object.shape, width, height) }));
  const drawn = labels.map((label): { classId: number; score: number; runs: RleRuns } => ({
    classId: label.classId,
    score: label.score ?? 1,
    runs: cocoRuns(label.shape, width, height),
  }));
  return {
    truth: objects.map(({ classId, areaPx2, runs, isCrowd }) => ({
      classId,
      areaPx2: areaPx2 ?? runs.areaPx,
      isCrowd: isCrowd === true,
    })),
    labels: drawn.map(({ classId, score, runs }) => ({ classId, areaPx2: runs.areaPx, score })),
    iou: (l, t) => {
      const [label, object] = [drawn[l], objects[t]];
      return label && object ? rleIou(label.runs, object.runs, object.isCrowd === true) : 0;
    },
  };
}

type Tally = { -readonly [key in keyof PanopticCounts]: PanopticCounts[key] } & { boundarySum: number };

function emptyTally(): Tally {
  return { truePositives: 0, falsePositives: 0, falseNegatives: 0, iouSum: 0, boundarySum: 0 };
}

function add(tally: Tally, outcome: Outcome): void {
  if (outcome.kind === "hit") tally.truePositives++;
  else if (outcome.kind === "missed") tally.falseNegatives++;
  else tally.falsePositives++;
  tally.iouSum += outcome.iou;
  tally.boundarySum += outcome.boundaryIou;
}

function qualityOf(
  images: readonly ImageOutcomes[],
  isWanted: (outcome: Outcome) => boolean,
  meanOverClasses = false,
): Quality {
  const at50 = emptyTally();
  const at75 = emptyTally();
  const perClass = new Map<number, Tally>();
  for (const image of images) {
    for (const outcome of image.at50.filter(isWanted)) {
      add(at50, outcome);
      const tally = perClass.get(outcome.classId) ?? emptyTally();
      perClass.set(outcome.classId, tally);
      add(tally, outcome);
    }
    for (const outcome of image.at75.filter(isWanted)) add(at75, outcome);
  }
  const panoptic = meanOverClasses ? meanPanopticQuality([...perClass.values()]) : panopticQuality(at50);
  return {
    objects: at50.truePositives + at50.falseNegatives,
    labels: at50.truePositives + at50.falsePositives,
    pq: panoptic?.pq,
    sq: panoptic?.sq,
    rq: panoptic?.rq,
    at50: detectionOf(at50),
    at75: detectionOf(at75),
    meanIou: share(at50.iouSum, at50.truePositives),
    boundaryIou: share(at50.boundarySum, at50.truePositives),
  };
}

function detectionOf({ truePositives: tp, falsePositives: fp, falseNegatives: fn }: Tally): Detection {
  return {
    precision: share(tp, tp + fp),
    recall: share(tp, tp + fn),
    f1: share(2 * tp, 2 * tp + fp + fn),
  };
}

function share(part: number, whole: number): number | undefined {
  return whole > 0 ? part / whole : undefined;
}

const FIGURES = [
  "pq",
  "sq",
  "rq",
  "precision50",
  "recall50",
  "f1At50",
  "precision75",
  "recall75",
  "f1At75",
  "meanIou",
  "boundaryIou",
] as const;

/** Per image and class, the tallies at both thresholds, so that a round of the bootstrap only adds numbers. */
function intervalsOf(
  outcomes: readonly ImageOutcomes[],
  classIds: readonly number[],
  rounds: number,
  seed: number,
): Intervals {
  const indexOf = new Map(classIds.map((classId, i) => [classId, i]));
  const FIELDS = 5;
  const row = (list: readonly Outcome[]) => {
    const sums = new Float64Array(classIds.length * FIELDS);
    for (const outcome of list) {
      const at = (indexOf.get(outcome.classId) ?? 0) * FIELDS;
      const kind = outcome.kind === "hit" ? 0 : outcome.kind === "false-alarm" ? 1 : 2;
      sums[at + kind] = (sums[at + kind] ?? 0) + 1;
      sums[at + 3] = (sums[at + 3] ?? 0) + outcome.iou;
      sums[at + 4] = (sums[at + 4] ?? 0) + outcome.boundaryIou;
    }
    // Few classes occur in one image, so only what is there is kept.
    const places = Int32Array.from(sums.keys()).filter((place) => sums[place] !== 0);
    return { places, values: Float64Array.from(places, (place) => sums[place] ?? 0) };
  };
  const addRow = (total: Float64Array, { places, values }: ReturnType<typeof row>) => {
    for (let i = 0; i < places.length; i++) total[places[i]!]! += values[i]!;
  };
  const rows = outcomes.map((image) => ({ at50: row(image.at50), at75: row(image.at75) }));
  const total50 = new Float64Array(classIds.length * FIELDS);
  const total75 = new Float64Array(classIds.length * FIELDS);
  const tallies = (total: Float64Array): Tally[] =>
    classIds.map((_, i) => {
      const [tp = 0, fp = 0, fn = 0, iouSum = 0, boundarySum = 0] = total.subarray(
        i * FIELDS,
        (i + 1) * FIELDS,
      );
      return { truePositives: tp, falsePositives: fp, falseNegatives: fn, iouSum, boundarySum };
    });
  return bootstrapIntervals(
    outcomes.length,
    FIGURES,
    (draw) => {
      total50.fill(0);
      total75.fill(0);
      for (const image of draw) {
        const found = rows[image];
        if (!found) continue;
        addRow(total50, found.at50);
        addRow(total75, found.at75);
      }
      const classes = tallies(total50);
      const panoptic = meanPanopticQuality(classes);
      const pooled50 = pool(classes);
      const at50 = detectionOf(pooled50);
      const at75 = detectionOf(pool(tallies(total75)));
      return {
        pq: panoptic?.pq,
        sq: panoptic?.sq,
        rq: panoptic?.rq,
        precision50: at50.precision,
        recall50: at50.recall,
        f1At50: at50.f1,
        precision75: at75.precision,
        recall75: at75.recall,
        f1At75: at75.f1,
        meanIou: share(pooled50.iouSum, pooled50.truePositives),
        boundaryIou: share(pooled50.boundarySum, pooled50.truePositives),
      };
    },
    { rounds, seed },
  );
}

function pool(tallies: readonly Tally[]): Tally {
  const pooled = emptyTally();
  for (const tally of tallies) {
    pooled.truePositives += tally.truePositives;
    pooled.falsePositives += tally.falsePositives;
    pooled.falseNegatives += tally.falseNegatives;
    pooled.iouSum += tally.iouSum;
    pooled.boundarySum += tally.boundarySum;
  }
  return pooled;
}
