import { closeSync, openSync } from "node:fs";
import { parseCocoAnnotation, parseCocoClass, parseCocoImage, type CocoContext } from "./coco";
import { FormatError, type DatasetClass, type DatasetImage, type DatasetSource } from "./dataset";
import { jsonRecords, readRecord } from "./jsonRecords";

export type CocoFile = DatasetSource & {
  readonly annotationCount: number;
  readonly close: () => void;
};

export type CocoFileOptions = {
  /** Images and classes that a bare list of results refers to. */
  readonly base?: Pick<DatasetSource, "images" | "classes">;
  readonly onProgress?: (done: number, all: number) => void;
};

/**
 * Opens a COCO file of any size: images, classes and the place of every annotation are kept, the annotations themselves
 * are read again image by image, so a 1 GB file needs some 20 bytes an annotation. Everything is checked once on
 * opening; throws FormatError for the first record that is wrong. A file that is a list of results needs `base`.
 */
export function openCoco(path: string, { base, onProgress }: CocoFileOptions = {}): CocoFile {
  const index = new AnnotationIndex();
  const contents = readHeader(path, base, onProgress);
  const { images, classes, context } = contents;
  const place = new Map(images.map(({ id }, i) => [id, i]));
  const ids = new Set<number>();
  for (const { list, index: i, start, length, parse } of jsonRecords(path)) {
    if (list !== contents.annotationsList) continue;
    const annotation = parseCocoAnnotation(parse(), `${list}[${i}]`, i + 1, context);
    if (ids.has(annotation.id)) throw new FormatError(`${list}[${i}]`, `id ${annotation.id} occurs twice`);
    ids.add(annotation.id);
    index.add(place.get(annotation.imageId) ?? 0, start, length, i);
  }
  const byImage = index.grouped(images.length);
  const file = openSync(path, "r");
  return {
    images,
    classes,
    annotationCount: index.count,
    annotationsOf: (imageId) => {
      const at = place.get(imageId);
      if (at === undefined) return [];
      return byImage(at).map(({ start, length, ordinal }) =>
        parseCocoAnnotation(
          readRecord(file, start, length),
          `${contents.annotationsList}[${ordinal}]`,
          ordinal + 1,
          context,
        ),
      );
    },
    close: () => closeSync(file),
  };
}

/** Lists may come in any order, so images and classes are read in a pass of their own. */
function readHeader(path: string, base: CocoFileOptions["base"], onProgress: CocoFileOptions["onProgress"]) {
  const images: DatasetImage[] = [];
  const classes: DatasetClass[] = [];
  const lists = new Set<string>();
  for (const { list, index, parse } of jsonRecords(path, onProgress)) {
    lists.add(list);
    if (list === "images") images.push(parseCocoImage(parse(), `images[${index}]`));
    else if (list === "categories") classes.push(parseCocoClass(parse(), `categories[${index}]`));
    else if (list === "") {
      if (base) break;
      throw new FormatError(
        "",
        "is a list of results: it names neither the sizes of its images nor its classes",
      );
    }
  }
  const isResults = lists.has("") || (base !== undefined && lists.size === 0);
  const known = isResults && base ? base : { images, classes };
  if (!isResults && images.length === 0 && classes.length === 0) {
    throw new FormatError("", "has neither images nor categories, so it is no COCO file");
  }
  return {
    images: known.images,
    classes: known.classes,
    annotationsList: isResults ? "" : "annotations",
    context: contextOf(known),
  };
}

/** Lookups for reading annotations; throws FormatError where a number or name occurs twice. */
export function contextOf({ images, classes }: Pick<DatasetSource, "images" | "classes">): CocoContext {
  const imageById = new Map<number, DatasetImage>();
  const imageByName = new Map<string, DatasetImage>();
  for (const image of images) {
    if (imageById.has(image.id)) throw new FormatError(`image ${image.id}`, "the id occurs twice");
    if (imageByName.has(image.fileName))
      throw new FormatError(`image ${image.fileName}`, "the file name occurs twice");
    imageById.set(image.id, image);
    imageByName.set(image.fileName, image);
  }
  const classIds = new Set<number>();
  const names = new Set<string>();
  for (const { id, name } of classes) {
    if (classIds.has(id)) throw new FormatError(`category ${id}`, "the id occurs twice");
    if (names.has(name)) throw new FormatError(`category ${name}`, "the name occurs twice");
    classIds.add(id);
    names.add(name);
  }
  return { imageById, imageByName, classIds };
}

type Place = { readonly start: number; readonly length: number; readonly ordinal: number };

/** Places of annotations in typed arrays that grow by doubling. */
class AnnotationIndex {
  count = 0;
  private image = new Int32Array(1024);
  private start = new Float64Array(1024);
  private size = new Int32Array(1024);
  private ordinal = new Int32Array(1024);

  add(image: number, start: number, length: number, ordinal: number): void {
    if (this.count === this.image.length) {
      this.image = grown(this.image, new Int32Array(2 * this.count));
      this.start = grown(this.start, new Float64Array(2 * this.count));
      this.size = grown(this.size, new Int32Array(2 * this.count));
      this.ordinal = grown(this.ordinal, new Int32Array(2 * this.count));
    }
    this.image[this.count] = image;
    this.start[this.count] = start;
    this.size[this.count] = length;
    this.ordinal[this.count++] = ordinal;
  }

  /** Places by image, in the order of the file, by counting sort. */
  grouped(imageCount: number): (image: number) => Place[] {
    const firstOf = new Int32Array(imageCount + 1);
    for (let i = 0; i < this.count; i++) firstOf[this.image[i]! + 1]!++;
    for (let i = 0; i < imageCount; i++) firstOf[i + 1]! += firstOf[i]!;
    const next = firstOf.slice();
    const order = new Int32Array(this.count);
    for (let i = 0; i < this.count; i++) order[next[this.image[i]!]!++] = i;
    return (image) =>
      Array.from(order.subarray(firstOf[image], firstOf[image + 1]), (i) => ({
        start: this.start[i]!,
        length: this.size[i]!,
        ordinal: this.ordinal[i]!,
      }));
  }
}

function grown<T extends Int32Array | Float64Array>(from: T, to: T): T {
  to.set(from);
  return to;
}
