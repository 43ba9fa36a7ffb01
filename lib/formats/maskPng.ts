import { forEachSpan, rasteriseRings, type Mask } from "@/lib/geometry/mask";
import { ringOfBox } from "@/lib/geometry/box";
import { maskFromRle, type LabelShape, type Rle } from "@/lib/geometry/rle";
import { contextOf } from "./cocoFile";
import { parseCocoClass, parseCocoImage } from "./coco";
import {
  areaOf,
  FormatError,
  type Dataset,
  type DatasetAnnotation,
  type DatasetImage,
  type DatasetSource,
  type OutputFile,
} from "./dataset";
import { asFields, asList, asText, asWhole, findFlag, present } from "./fields";
import { uniquePaths, withExtension } from "./names";
import { decodePng, encodePng } from "./png";
import { extraFields, parseExtras } from "./properties";

/** The file beside the masks that says what each number is. */
export const INSTANCES_FILE = "instances.json";
const INSTANCES_MAX = 0xffff;

export type MaskPngOptions = {
  /** Colours for looking at, for images of at most 255 instances; else grey levels. */
  readonly palette?: boolean;
};

/**
 * Writes one PNG an image in which each pixel holds the number of its instance, 0 for none, and `instances.json`, which says
 * what each number is. Grey of 8 bits, of 16 from 256 instances on. A pixel can hold one number only, so smaller
 * instances lie on top of larger ones; `pixels` counts what is left of each. Throws FormatError for an image of
 * more than 65,535 instances.
 */
export function* writeMaskPng(
  source: DatasetSource,
  { palette = false }: MaskPngOptions = {},
): Generator<OutputFile> {
  const unique = uniquePaths();
  const images: string[] = [];
  const instances: string[] = [];
  for (const image of source.images) {
    const annotations = source.annotationsOf(image.id);
    const path = unique(withExtension(image.fileName, "png"));
    const values = drawInstances(annotations, image);
    const pixels = new Uint32Array(annotations.length + 1);
    for (const value of values) pixels[value]!++;
    const kind = annotations.length > 0xff ? "grey16" : palette ? "palette" : "grey8";
    yield { path, bytes: encodePng({ width: image.width, height: image.height, values }, kind) };
    const { id, fileName, width, height, sha256 } = image;
    images.push(JSON.stringify(present({ id, file_name: fileName, width, height, sha256, mask: path })));
    annotations.forEach((annotation, i) => {
      const { crowd, classId } = annotation;
      instances.push(
        JSON.stringify({
          id: annotation.id,
          image_id: image.id,
          value: i + 1,
          pixels: pixels[i + 1],
          category_id: classId,
          crowd,
          ...extraFields(annotation),
        }),
      );
    });
  }
  const classes = source.classes.map(({ id, name }) => JSON.stringify({ id, name }));
  const list = (items: readonly string[]) => `[${items.map((item) => `\n${item}`).join(",")}]`;
  const text = `{"images":${list(images)},\n"categories":${list(classes)},\n"instances":${list(instances)}}\n`;
  yield { path: INSTANCES_FILE, bytes: new TextEncoder().encode(text) };
}

function drawInstances(annotations: readonly DatasetAnnotation[], image: DatasetImage): Uint16Array {
  if (annotations.length > INSTANCES_MAX) {
    throw new FormatError(
      `image ${image.fileName}`,
      `has ${annotations.length} instances, a mask holds ${INSTANCES_MAX}`,
    );
  }
  const { width, height } = image;
  const values = new Uint16Array(width * height);
  const order = annotations
    .map((annotation, i) => ({ annotation, value: i + 1, areaPx2: areaOf(annotation) }))
    .sort((p, q) => q.areaPx2 - p.areaPx2 || p.value - q.value);
  for (const { annotation, value } of order) {
    forEachSpan(maskOfShape(annotation.shape, width, height), (row, from, to) =>
      values.fill(value, row * width + from, row * width + to),
    );
  }
  return values;
}

/** The pixels of a shape: those whose centres it holds. */
export function maskOfShape(shape: LabelShape, width: number, height: number): Mask {
  if (shape.kind === "mask") return maskFromRle(shape.rle);
  return rasteriseRings(shape.kind === "box" ? [ringOfBox(shape.box)] : shape.rings, width, height);
}

/**
 * Reads what `writeMaskPng` writes; `read` gives the bytes of a file beside `instances.json`. Instances that lie wholly under
 * others have no pixels and are left out. Throws FormatError for the first record that is wrong.
 */
export function readMaskPng(instancesJson: unknown, read: (path: string) => Uint8Array): Dataset {
  const fields = asFields(instancesJson, INSTANCES_FILE);
  const nodes = asList(fields.images, INSTANCES_FILE, "images").map((node, i) => ({
    image: parseCocoImage(node, `images[${i}]`),
    mask: asText(asFields(node, `images[${i}]`).mask, `images[${i}]`, "mask"),
  }));
  const classes = asList(fields.categories, INSTANCES_FILE, "categories").map((node, i) =>
    parseCocoClass(node, `categories[${i}]`),
  );
  const images = nodes.map(({ image }) => image);
  const { imageById, classIds } = contextOf({ images, classes });
  const wanted = asList(fields.instances, INSTANCES_FILE, "instances").map((node, i) => {
    const record = `instances[${i}]`;
    const instance = asFields(node, record);
    const imageId = asWhole(instance.image_id, record, "image_id");
    const classId = asWhole(instance.category_id, record, "category_id");
    if (!imageById.has(imageId)) throw new FormatError(record, `image_id ${imageId} is not listed in images`);
    if (!classIds.has(classId))
      throw new FormatError(record, `category_id ${classId} is not listed in categories`);
    return {
      record,
      imageId,
      classId,
      id: instance.id === undefined ? i + 1 : asWhole(instance.id, record, "id"),
      value: asWhole(instance.value, record, "value", 1),
      pixels: instance.pixels === undefined ? undefined : asWhole(instance.pixels, record, "pixels"),
      crowd: findFlag(instance.crowd, record, "crowd") ?? false,
      extras: parseExtras(instance, record),
    };
  });
  const annotations = nodes.flatMap(({ image, mask }) => {
    const codes = codesOf(image, mask, read(mask));
    return wanted.flatMap(
      ({ record, imageId, classId, id, value, pixels, crowd, extras }): DatasetAnnotation[] => {
        if (imageId !== image.id) return [];
        const rle = codes.get(value);
        if (rle) return [{ id, imageId, classId, shape: { kind: "mask", rle }, crowd, ...extras }];
        if (pixels === 0) return [];
        throw new FormatError(record, `no pixel of ${mask} has the value ${value}`);
      },
    );
  });
  return { images, classes, annotations };
}

/** The run-length code of each number that occurs. */
function codesOf({ width, height }: DatasetImage, path: string, bytes: Uint8Array): Map<number, Rle> {
  const png = decodeNamed(path, bytes);
  if (png.width !== width || png.height !== height) {
    throw new FormatError(path, `is ${png.width} x ${png.height} px, the image ${width} x ${height}`);
  }
  const runs = new Map<number, { counts: number[]; end: number }>();
  let at = 0;
  let start = 0;
  let current = png.values[0] ?? 0;
  const close = () => {
    if (current === 0) return;
    const run = runs.get(current) ?? { counts: [], end: 0 };
    run.counts.push(start - run.end, at - start);
    run.end = at;
    runs.set(current, run);
  };
  for (let column = 0; column < width; column++) {
    for (let row = 0; row < height; row++, at++) {
      const value = png.values[row * width + column]!;
      if (value === current) continue;
      close();
      start = at;
      current = value;
    }
  }
  close();
  const codes = new Map<number, Rle>();
  for (const [value, { counts, end }] of runs) {
    if (end < width * height) counts.push(width * height - end);
    codes.set(value, { width, height, counts });
  }
  return codes;
}

function decodeNamed(path: string, bytes: Uint8Array) {
  try {
    return decodePng(bytes);
  } catch (cause) {
    if (cause instanceof FormatError) throw new FormatError(path, cause.reason, { cause });
    throw cause;
  }
}
