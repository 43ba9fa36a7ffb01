import { parseCocoAnnotation, parseCocoImage, type CocoContext } from "./coco";
import { FormatError, type DatasetImage } from "./dataset";
import { boxOfShape } from "@/lib/geometry/box";
import type { Box, Rings } from "@/lib/geometry/types";

/** A prediction of somebody else's model for one picture, px of the upright original. */
export type ImportedPrediction = { box: Box; rings: Rings; classId: string | null; score: number };

/** One record that was not used: the line on which it begins (from 1), and why. */
export type WrongRecord = { line: number; reason: string };

export type ImportedResults = {
  byImage: Map<string, ImportedPrediction[]>;
  used: number;
  wrong: WrongRecord[];
};

export type ImportTarget = {
  images: readonly { id: string; fileName: string; width: number; height: number }[];
  /** The key: matched by number, or by name where the file lists categories. */
  classes: readonly { id: string; number: number; name: string }[];
};

const RECORDS_MAX = 300_000;
/** A person is dealt few; of one picture only the best are kept. */
const KEPT_AN_IMAGE = 300;
/** `category_id` of a prediction whose class is not known. */
const CLASS_UNKNOWN = 0;

/**
 * Reads COCO results: a list of records, one record a line (JSON Lines), or a file with `images`, `categories` and
 * `annotations`. Pictures are matched by `file_name` in the record, or by `image_id` through the list of images; classes by the
 * number in the key, or by name through the list of categories; 0 is no class. A record that fits nothing is left
 * out and named with its line; the rest is used. Throws FormatError where the file as a whole cannot be
 * read. O(characters).
 */
export function readImportedResults(text: string, target: ImportTarget): ImportedResults {
  const byImage = new Map<string, ImportedPrediction[]>();
  const wrong: WrongRecord[] = [];
  const { records, images, categories } = recordsOf(text, wrong);
  if (records.length > RECORDS_MAX)
    throw new FormatError(
      "",
      `The file holds ${records.length} predictions; ${RECORDS_MAX} at most are taken.`,
    );
  const context = contextOf(target, images);
  const classOf = classesOf(target, categories);
  let used = 0;
  for (const { value, line } of records) {
    try {
      const { imageId, prediction } = readOne(value, context, classOf);
      const own = byImage.get(imageId) ?? [];
      byImage.set(imageId, own);
      own.push(prediction);
      used++;
    } catch (cause) {
      if (!(cause instanceof FormatError)) throw cause;
      wrong.push({ line, reason: cause.reason });
    }
  }
  for (const [imageId, own] of byImage) {
    byImage.set(imageId, own.sort((a, b) => b.score - a.score).slice(0, KEPT_AN_IMAGE));
  }
  return { byImage, used, wrong: wrong.sort((a, b) => a.line - b.line) };
}

type Located = { value: unknown; line: number };

function readOne(
  value: unknown,
  { context, idOf }: { context: CocoContext; idOf: ReadonlyMap<number, string> },
  classOf: (categoryId: unknown) => string | null,
): { imageId: string; prediction: ImportedPrediction } {
  if (typeof value !== "object" || value === null || Array.isArray(value))
    throw new FormatError("", "is not an object");
  const fields = value as Record<string, unknown>;
  if (typeof fields.file_name === "string" && !context.imageByName.has(fields.file_name))
    throw new FormatError("", `unknown file_name ${quoted(fields.file_name)}`);
  if (fields.file_name === undefined && typeof fields.image_id === "number") {
    if (context.imageById.size === 0)
      throw new FormatError("", "has no file_name, and the file lists no images to look up image_id in");
    if (!context.imageById.has(fields.image_id))
      throw new FormatError("", `unknown image_id ${fields.image_id}`);
  }
  const classId = classOf(fields.category_id);
  const { score } = fields;
  if (typeof score !== "number" || !(score >= 0 && score <= 1))
    throw new FormatError("", `score is ${JSON.stringify(score) ?? "missing"}, not a number from 0 to 1`);
  const known = { ...fields, category_id: 1 };
  const { imageId, shape, box: stated } = parseCocoAnnotation(known, "", 1, context);
  const image =
    context.imageById.get(imageId) ?? [...context.imageByName.values()].find(({ id }) => id === imageId);
  const id = idOf.get(imageId);
  if (!image || id === undefined) throw new FormatError("", "is of a picture that is not in this batch");
  const rings = shape.kind === "polygon" ? shape.rings : [];
  const box = clipped(stated ?? (shape.kind === "mask" ? undefined : boxOfShape(shape)), image);
  if (!box)
    throw new FormatError(
      "",
      shape.kind === "mask" ? "has no bbox beside its mask" : "lies outside its picture",
    );
  return {
    imageId: id,
    prediction: { box, rings: rings.map((ring) => clippedRing(ring, image)), classId, score },
  };
}

function clipped(box: Box | undefined, { width, height }: DatasetImage): Box | undefined {
  if (!box) return undefined;
  const left = Math.max(0, box[0]);
  const top = Math.max(0, box[1]);
  const right = Math.min(width, box[0] + box[2]);
  const bottom = Math.min(height, box[1] + box[3]);
  return right - left >= 1 && bottom - top >= 1 ? [left, top, right - left, bottom - top] : undefined;
}

const clippedRing = (ring: Rings[number], { width, height }: DatasetImage): Rings[number] =>
  ring.map(([x, y]) => [Math.min(width, Math.max(0, x)), Math.min(height, Math.max(0, y))] as const);

const quoted = (name: string) => `'${name.length > 80 ? `${name.slice(0, 79)}…` : name}'`;

function contextOf(
  { images }: ImportTarget,
  listed: readonly Located[] | undefined,
): { context: CocoContext; idOf: Map<number, string> } {
  const imageByName = new Map<string, DatasetImage>();
  const imageById = new Map<number, DatasetImage>();
  const idOf = new Map<number, string>();
  images.forEach(({ id, fileName, width, height }, index) => {
    // Own numbers below zero cannot meet those of the file.
    imageByName.set(fileName, { id: -1 - index, fileName, width, height });
    idOf.set(-1 - index, id);
  });
  for (const { value, line } of listed ?? []) {
    let stated: DatasetImage;
    try {
      stated = parseCocoImage(value, "");
    } catch (cause) {
      if (cause instanceof FormatError)
        throw new FormatError(`line ${line}`, `in images: ${cause.reason}`, { cause });
      throw cause;
    }
    const known = imageByName.get(stated.fileName);
    if (known) imageById.set(stated.id, known);
  }
  return { context: { imageById, imageByName, classIds: new Set([1]) }, idOf };
}

function classesOf(
  { classes }: ImportTarget,
  listed: readonly Located[] | undefined,
): (categoryId: unknown) => string | null {
  const byNumber = new Map<number, { id: string } | string>();
  if (listed) {
    const byName = new Map(classes.map((entry) => [entry.name.toLowerCase(), entry]));
    for (const { value } of listed) {
      const { id, name } = (value ?? {}) as { id?: unknown; name?: unknown };
      if (typeof id !== "number" || typeof name !== "string") continue;
      byNumber.set(id, byName.get(name.trim().toLowerCase()) ?? `category ${quoted(name)} is not in the key`);
    }
  } else for (const entry of classes) byNumber.set(entry.number, entry);
  return (categoryId) => {
    if (categoryId === CLASS_UNKNOWN && !byNumber.has(CLASS_UNKNOWN)) return null;
    if (typeof categoryId !== "number") throw new FormatError("", "has no category_id");
    const found = byNumber.get(categoryId);
    if (typeof found === "string") throw new FormatError("", found);
    if (!found)
      throw new FormatError(
        "",
        listed
          ? `category_id ${categoryId} is not listed in categories`
          : `the key has no class number ${categoryId}`,
      );
    return found.id;
  };
}

/** The records of a file with the lines on which they begin. */
function recordsOf(
  text: string,
  wrong: WrongRecord[],
): { records: Located[]; images?: Located[]; categories?: Located[] } {
  if (text.trim() === "") throw new FormatError("", "The file is empty.");
  let whole: unknown;
  try {
    whole = JSON.parse(text);
  } catch (cause) {
    const lines = readLines(text, wrong);
    if (lines) return { records: lines };
    throw new FormatError(`line ${lineOfSyntaxError(cause, text)}`, "is not valid JSON", { cause });
  }
  if (Array.isArray(whole)) return { records: located(whole, elementLines(text, null)) };
  const { images, categories, annotations } = (typeof whole === "object" ? (whole ?? {}) : {}) as Record<
    string,
    unknown
  >;
  if (!Array.isArray(annotations)) {
    // A single record on a single line is a list of one.
    if (typeof whole === "object" && whole !== null && "bbox" in whole)
      return { records: [{ value: whole, line: 1 }] };
    throw new FormatError("", "The file is neither a list of results nor has it annotations.");
  }
  return {
    records: located(annotations, elementLines(text, "annotations")),
    ...(Array.isArray(images) && { images: located(images, elementLines(text, "images")) }),
    ...(Array.isArray(categories) && { categories: located(categories, elementLines(text, "categories")) }),
  };
}

const located = (values: readonly unknown[], lines: readonly number[]): Located[] =>
  values.map((value, index) => ({ value, line: lines[index] ?? 0 }));

/** JSON Lines, if the first line that is not empty is an object by itself; a line that is not JSON is a wrong record. */
function readLines(text: string, wrong: WrongRecord[]): Located[] | undefined {
  const records: Located[] = [];
  const lines = text.split(/\r?\n/);
  let isFirst = true;
  for (const [index, content] of lines.entries()) {
    if (content.trim() === "") continue;
    let value: unknown;
    let isRead = true;
    try {
      value = JSON.parse(content);
    } catch {
      isRead = false;
    }
    if (isFirst && (!isRead || typeof value !== "object" || Array.isArray(value))) return undefined;
    isFirst = false;
    if (isRead) records.push({ value, line: index + 1 });
    else wrong.push({ line: index + 1, reason: "is not valid JSON" });
  }
  return records;
}

/** Lines on which the elements of the outermost list begin, or of the list under a key of the outermost object. O(characters). */
function elementLines(text: string, key: string | null): number[] {
  const lines: number[] = [];
  const listDepth = key === null ? 1 : 2;
  let depth = 0;
  let line = 1;
  let isWanted = key === null;
  let isAwaited = false; // an element of the wanted list may begin here
  let lastText = "";
  for (let at = 0; at < text.length; at++) {
    const sign = text[at];
    if (sign === "\n") line++;
    else if (sign === '"') {
      if (isAwaited && depth === listDepth) [isAwaited] = [false, lines.push(line)];
      const start = at + 1;
      for (at = start; at < text.length && text[at] !== '"'; at++) if (text[at] === "\\") at++;
      if (depth === 1) lastText = text.slice(start, at);
    } else if (sign === "[" || sign === "{") {
      if (isAwaited && depth === listDepth) [isAwaited] = [false, lines.push(line)];
      depth++;
      if (sign === "[" && depth === listDepth) {
        isWanted = key === null || lastText === key;
        isAwaited = isWanted;
      }
    } else if (sign === "]" || sign === "}") {
      if (depth === listDepth) isAwaited = false;
      depth--;
    } else if (sign === ",") {
      if (depth === listDepth && isWanted && sign === ",") isAwaited = true;
      if (depth < listDepth) isWanted = key === null;
    } else if (isAwaited && depth === listDepth && sign !== undefined && /\S/.test(sign)) {
      [isAwaited] = [false, lines.push(line)];
    }
  }
  return lines;
}

function lineOfSyntaxError(cause: unknown, text: string): number {
  const message = cause instanceof Error ? cause.message : "";
  const stated = /\(line (\d+)/.exec(message)?.[1];
  if (stated) return Number(stated);
  const position = Number(/position (\d+)/.exec(message)?.[1] ?? text.length);
  return text.slice(0, position).split("\n").length;
}
