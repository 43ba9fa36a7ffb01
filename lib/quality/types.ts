import type { AveragePrecision } from "./averagePrecision";
import type { LabelShape } from "@/lib/geometry/rle";

/** One true object. A crowd is many objects outlined as one: labels in it are neither hits nor misses. */
export type TrueObject = {
  readonly classId: number;
  readonly shape: LabelShape;
  readonly isCrowd?: boolean;
  /** The area that the truth states, px²; decides small, medium or large. Taken from the shape where absent. */
  readonly areaPx2?: number;
};

/** One label to be judged. */
export type JudgedLabel = {
  readonly classId: number;
  readonly shape: LabelShape;
  /** Confidence, higher is surer; 1 where absent. Only average precision uses it. */
  readonly score?: number;
};

/** Both sides of one image. */
export type JudgedImage = {
  readonly width: number;
  readonly height: number;
  readonly truth: readonly TrueObject[];
  readonly labels: readonly JudgedLabel[];
};

/** Detection at one IoU threshold, 0..1; undefined where it would divide by nothing. */
export type Detection = {
  readonly precision: number | undefined;
  readonly recall: number | undefined;
  readonly f1: number | undefined;
};

/** Quality of a group of objects: all, one class or one size. */
export type Quality = {
  readonly objects: number;
  readonly labels: number;
  readonly pq: number | undefined;
  readonly sq: number | undefined;
  readonly rq: number | undefined;
  readonly at50: Detection;
  readonly at75: Detection;
  /** Mean IoU and mean boundary IoU of the pairs matched over IoU 0.5. */
  readonly meanIou: number | undefined;
  readonly boundaryIou: number | undefined;
};

/** The middle 95 % of the bootstrap. */
export type Interval = { readonly low: number; readonly high: number };

export type Intervals = {
  readonly [
    figure in
      | "pq"
      | "sq"
      | "rq"
      | "precision50"
      | "recall50"
      | "f1At50"
      | "precision75"
      | "recall75"
      | "f1At75"
      | "meanIou"
      | "boundaryIou"
  ]: Interval | undefined;
};

export type QualityReport = {
  readonly images: number;
  /** PQ, SQ and RQ are means over classes; the rest pools all objects. */
  readonly overall: Quality;
  readonly intervals: Intervals;
  readonly perClass: readonly ({ readonly classId: number } & Quality)[];
  readonly perSize: { readonly [size in "small" | "medium" | "large"]: Quality };
  /** Average precision on boxes and on pixels. */
  readonly ap: { readonly box: AveragePrecision; readonly mask: AveragePrecision };
};
