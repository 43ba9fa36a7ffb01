import { boxArea, boxOfShape } from "@/lib/geometry/box";
import { shapeArea } from "@/lib/geometry/iou";
import { rleArea, rleBounds, type LabelShape } from "@/lib/geometry/rle";
import type { Box } from "@/lib/geometry/types";

export type DatasetImage = {
  readonly id: number;
  /** Name by which files of different origin are matched; relative, with "/" between folders. */
  readonly fileName: string;
  readonly width: number;
  readonly height: number;
  /** SHA-256 of the image file, lower-case hexadecimal. */
  readonly sha256?: string;
};

export type DatasetClass = { readonly id: number; readonly name: string };

export type DatasetAnnotation = {
  readonly id: number;
  readonly imageId: number;
  readonly classId: number;
  /** In px of the upright image. */
  readonly shape: LabelShape;
  /** Many objects outlined as one. */
  readonly crowd: boolean;
  /** What the source states, where it does; else `boxOf` and `areaOf` derive them from the shape. */
  readonly box?: Box;
  readonly areaPx2?: number;
  readonly truncated?: boolean;
  readonly occluded?: boolean;
  readonly difficult?: boolean;
  /** Confidence, 0..1 by convention. */
  readonly score?: number;
  /** Share of the annotators' weight that agrees, and how far their outlines differ; see the quality report. */
  readonly support?: number;
  readonly spread?: number;
};

/** A labelled set of images, whole in memory. */
export type Dataset = {
  readonly images: readonly DatasetImage[];
  readonly classes: readonly DatasetClass[];
  readonly annotations: readonly DatasetAnnotation[];
};

/** The same, one image's annotations at a time, so that a file larger than memory can be passed on. */
export type DatasetSource = {
  readonly images: readonly DatasetImage[];
  readonly classes: readonly DatasetClass[];
  /** In the order of the source. */
  readonly annotationsOf: (imageId: number) => readonly DatasetAnnotation[];
};

/** One file that a writer makes; the path is relative, with "/" between folders. */
export type OutputFile = { readonly path: string; readonly bytes: Uint8Array };

/** Why input was refused. `record` says where in the file, `reason` what is wrong; both are one line. */
export class FormatError extends Error {
  override readonly name = "FormatError";
  constructor(
    readonly record: string,
    readonly reason: string,
    options?: ErrorOptions,
  ) {
    super(record === "" ? reason : `${record}: ${reason}`, options);
  }
}

/** Reads a whole dataset image by image. */
export function toSource({ images, classes, annotations }: Dataset): DatasetSource {
  const byImage = new Map<number, DatasetAnnotation[]>();
  for (const annotation of annotations) {
    const list = byImage.get(annotation.imageId);
    if (list) list.push(annotation);
    else byImage.set(annotation.imageId, [annotation]);
  }
  return { images, classes, annotationsOf: (imageId) => byImage.get(imageId) ?? [] };
}

/** Gathers a source in memory, annotations in order of images. */
export function toDataset(source: DatasetSource): Dataset {
  const { images, classes } = source;
  return { images, classes, annotations: images.flatMap(({ id }) => source.annotationsOf(id)) };
}

/** The stated box of an annotation, or the smallest one around its shape. */
export function boxOf({ box, shape }: DatasetAnnotation): Box {
  return box ?? (shape.kind === "mask" ? rleBounds(shape.rle) : boxOfShape(shape));
}

/** The stated area of an annotation in px², or that of its shape. */
export function areaOf({ areaPx2, shape }: DatasetAnnotation): number {
  if (areaPx2 !== undefined) return areaPx2;
  if (shape.kind === "mask") return rleArea(shape.rle);
  return shape.kind === "box" ? boxArea(shape.box) : shapeArea(shape);
}

/** Name of a class; throws FormatError for an id that the dataset does not list. */
export function classNames(classes: readonly DatasetClass[]): (classId: number) => string {
  const names = new Map(classes.map(({ id, name }) => [id, name]));
  return (classId) => {
    const name = names.get(classId);
    if (name === undefined) throw new FormatError(`class ${classId}`, "is used but not listed");
    return name;
  };
}
