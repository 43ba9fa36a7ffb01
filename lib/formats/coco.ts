import { partsOfRings } from "@/lib/geometry/nest";
import { mergeRegions } from "@/lib/geometry/clip";
import { boxOfRing, boxIntersectionArea } from "@/lib/geometry/box";
import { ringsArea } from "@/lib/geometry/region";
import {
  checkRle,
  rleFromString,
  RleError,
  rleToString,
  type LabelShape,
  type Rle,
} from "@/lib/geometry/rle";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import {
  areaOf,
  boxOf,
  FormatError,
  type DatasetAnnotation,
  type DatasetClass,
  type DatasetImage,
  type DatasetSource,
} from "./dataset";
import {
  asFields,
  asList,
  asCoordinate,
  asSize,
  asText,
  asWhole,
  describe,
  findFlag,
  present,
  type Fields,
} from "./fields";
import { extraFields, parseExtras } from "./properties";

/** Reads an element of `images`. */
export function parseCocoImage(value: unknown, record: string): DatasetImage {
  const fields = asFields(value, record);
  const { sha256 } = fields;
  return {
    id: asWhole(fields.id, record, "id"),
    fileName: asText(fields.file_name, record, "file_name"),
    ...asSize(fields.width, fields.height, record),
    ...(sha256 === undefined ? {} : { sha256: asText(sha256, record, "sha256") }),
  };
}

/** Reads an element of `categories`. */
export function parseCocoClass(value: unknown, record: string): DatasetClass {
  const fields = asFields(value, record);
  return { id: asWhole(fields.id, record, "id"), name: asText(fields.name, record, "name") };
}

export type CocoContext = {
  readonly imageById: ReadonlyMap<number, DatasetImage>;
  readonly imageByName: ReadonlyMap<string, DatasetImage>;
  readonly classIds: ReadonlySet<number>;
};

/**
 * Reads an element of `annotations` or of a list of results. Polygons keep their coordinates; where several polygons of one
 * annotation overlap, COCO means their union and we mean even-odd, so they become that union. No `segmentation`
 * means a box. Coordinates outside the image are allowed, as they occur in published sets.
 */
export function parseCocoAnnotation(
  value: unknown,
  record: string,
  fallbackId: number,
  context: CocoContext,
): DatasetAnnotation {
  const fields = asFields(value, record);
  const image = imageOf(fields, record, context);
  const classId = asWhole(fields.category_id, record, "category_id");
  if (!context.classIds.has(classId))
    throw new FormatError(record, `category_id ${classId} is not listed in categories`);
  const extras = parseExtras(fields, record);
  const { box } = extras;
  if (box && (box[2] < 0 || box[3] < 0)) {
    throw new FormatError(record, `bbox is ${box[2]} x ${box[3]} px, which is negative`);
  }
  return {
    id: fields.id === undefined ? fallbackId : asWhole(fields.id, record, "id"),
    imageId: image.id,
    classId,
    shape: parseShape(fields.segmentation, box, image, record),
    crowd: findFlag(fields.iscrowd, record, "iscrowd") ?? false,
    ...extras,
  };
}

function imageOf(fields: Fields, record: string, { imageById, imageByName }: CocoContext): DatasetImage {
  // A list of results may name its image instead of, or beside, a number of its own.
  if (typeof fields.file_name === "string") {
    const image = imageByName.get(fields.file_name);
    if (image) return image;
    throw new FormatError(record, `file_name ${describe(fields.file_name)} is not listed in images`);
  }
  const imageId = asWhole(fields.image_id, record, "image_id");
  const image = imageById.get(imageId);
  if (!image) throw new FormatError(record, `image_id ${imageId} is not listed in images`);
  return image;
}

function parseShape(value: unknown, box: Box | undefined, image: DatasetImage, record: string): LabelShape {
  if (value === undefined || value === null || (Array.isArray(value) && value.length === 0)) {
    if (box === undefined) throw new FormatError(record, "has neither segmentation nor bbox");
    return { kind: "box", box };
  }
  if (!Array.isArray(value))
    return { kind: "mask", rle: parseRle(asFields(value, `${record}.segmentation`), image, record) };
  const rings = value.map((flat, i) => parseRing(flat, record, i));
  return { kind: "polygon", rings: withoutOverlap(rings) };
}

function parseRing(value: unknown, record: string, index: number): Ring {
  const flat = asList(value, record, `segmentation[${index}]`);
  if (flat.length < 6 || flat.length % 2 === 1) {
    throw new FormatError(
      record,
      `segmentation[${index}] has ${flat.length} numbers; an outline needs an even count from 6 on`,
    );
  }
  const ring: Point[] = [];
  for (let i = 0; i < flat.length; i += 2) {
    const x = asCoordinate(flat[i], record, `segmentation[${index}][${i}]`);
    const y = asCoordinate(flat[i + 1], record, `segmentation[${index}][${i + 1}]`);
    ring.push([x, y]);
  }
  return ring;
}

function withoutOverlap(rings: Rings): Rings {
  const boxes = rings.map(boxOfRing);
  const mayMeet = boxes.some((a, i) => boxes.slice(0, i).some((b) => boxIntersectionArea(a, b) > 0));
  if (!mayMeet) return rings;
  const separate = rings.reduce((sum, ring) => sum + ringsArea([ring]), 0);
  return Math.abs(separate - ringsArea(rings)) <= 1e-9 * separate
    ? rings
    : mergeRegions(rings.map((ring) => [ring]));
}

function parseRle(fields: Fields, image: DatasetImage, record: string): Rle {
  const size = asList(fields.size, record, "segmentation.size");
  const height = asWhole(size[0], record, "segmentation.size[0]");
  const width = asWhole(size[1], record, "segmentation.size[1]");
  if (size.length !== 2 || height !== image.height || width !== image.width) {
    throw new FormatError(
      record,
      `segmentation.size is ${height} x ${width}, the image ${image.height} x ${image.width} (rows x columns)`,
    );
  }
  try {
    if (typeof fields.counts === "string") return rleFromString(fields.counts, width, height);
    const counts = asList(fields.counts, record, "segmentation.counts");
    return checkRle({
      width,
      height,
      counts: counts.map((run) => asWhole(run, record, "a run of segmentation.counts")),
    });
  } catch (cause) {
    if (cause instanceof RleError) throw new FormatError(record, `segmentation: ${cause.message}`, { cause });
    throw cause;
  }
}

export type CocoInfo = { readonly [key: string]: string | number };

/**
 * Writes a dataset as one COCO file, a piece at a time. Coordinates are written with all their digits. Crowds are written
 * as plain run lengths and other masks as strings, as in the data set itself; a region with holes becomes one
 * outline that walks into each hole and back along the same line, because COCO polygons cannot carry holes.
 */
export function* writeCoco(source: DatasetSource, info: CocoInfo = {}): Generator<string> {
  yield `{"info":${JSON.stringify(info)},\n"licenses":[],\n"images":[`;
  for (const [i, image] of source.images.entries()) yield separated(i, JSON.stringify(cocoImage(image)));
  yield `],\n"categories":[`;
  for (const [i, { id, name }] of source.classes.entries()) yield separated(i, JSON.stringify({ id, name }));
  yield `],\n"annotations":[`;
  let count = 0;
  for (const image of source.images) {
    for (const annotation of source.annotationsOf(image.id)) {
      yield separated(count++, JSON.stringify(cocoAnnotation(annotation)));
    }
  }
  yield "]}\n";
}

function separated(index: number, text: string): string {
  return index === 0 ? `\n${text}` : `,\n${text}`;
}

function cocoImage({ id, fileName, width, height, sha256 }: DatasetImage): Fields {
  return present({ id, file_name: fileName, width, height, sha256 });
}

function cocoAnnotation(annotation: DatasetAnnotation): Fields {
  const { id, imageId, classId, shape, crowd } = annotation;
  const extras = Object.entries(extraFields(annotation));
  return {
    id,
    image_id: imageId,
    category_id: classId,
    iscrowd: Number(crowd),
    bbox: boxOf(annotation),
    area: areaOf(annotation),
    segmentation: cocoSegmentation(shape, crowd),
    ...Object.fromEntries(
      extras.map(([key, value]) => [key, typeof value === "boolean" ? Number(value) : value]),
    ),
  };
}

/** The `segmentation` of a shape; an empty list for a box. */
export function cocoSegmentation(shape: LabelShape, asCounts = false): unknown {
  if (shape.kind === "box") return [];
  if (shape.kind === "polygon") return outerOutlines(shape.rings).map((ring) => ring.flat());
  const { width, height, counts } = shape.rle;
  return { size: [height, width], counts: asCounts ? counts : rleToString(shape.rle) };
}

function outerOutlines(rings: Rings): Rings {
  if (rings.length === 1) return rings;
  const parts = partsOfRings(rings);
  if (parts.every(({ holes }) => holes.length === 0)) return rings;
  return parts.map(({ outer, holes }) => holes.reduce(bridged, outer));
}

/** One ring that runs along the outline, over to the nearest corner of the hole, round it, and back the same way. */
function bridged(outer: Ring, hole: Ring): Ring {
  let best = { distance: Infinity, from: 0, to: 0 };
  for (const [from, [x, y]] of outer.entries()) {
    for (const [to, [holeX, holeY]] of hole.entries()) {
      const distance = (x - holeX) ** 2 + (y - holeY) ** 2;
      if (distance < best.distance) best = { distance, from, to };
    }
  }
  const { from, to } = best;
  const round = [...hole.slice(to), ...hole.slice(0, to + 1)];
  return [...outer.slice(0, from + 1), ...round, ...outer.slice(from)];
}
