import { XMLParser, XMLValidator } from "fast-xml-parser";
import type { Box } from "@/lib/geometry/types";
import {
  boxOf,
  classNames,
  FormatError,
  type Dataset,
  type DatasetAnnotation,
  type DatasetSource,
  type OutputFile,
} from "./dataset";
import { asCoordinate, asFields, asList, asSize, asText, describe, present, type Fields } from "./fields";
import { withExtension } from "./names";

const encoder = new TextEncoder();

/**
 * Writes one Pascal VOC file an image (Everingham et al., 2010): boxes only, in whole pixels counted from 1, both ends
 * included, so a box of whole pixels is exact and any other is rounded to the nearest. A crowd is marked difficult,
 * which VOC's evaluation leaves out as COCO's leaves out crowds.
 */
export function* writeVoc(source: DatasetSource): Generator<OutputFile> {
  const nameOf = classNames(source.classes);
  for (const image of source.images) {
    const slash = image.fileName.lastIndexOf("/");
    const lines = [
      `<annotation>`,
      `  <folder>${escape(slash < 0 ? "" : image.fileName.slice(0, slash))}</folder>`,
      `  <filename>${escape(image.fileName.slice(slash + 1))}</filename>`,
      `  <size>`,
      `    <width>${image.width}</width>`,
      `    <height>${image.height}</height>`,
      `    <depth>3</depth>`,
      `  </size>`,
      `  <segmented>0</segmented>`,
      ...source
        .annotationsOf(image.id)
        .flatMap((annotation) => objectLines(annotation, nameOf(annotation.classId))),
      `</annotation>`,
      ``,
    ];
    yield { path: withExtension(image.fileName, "xml"), bytes: encoder.encode(lines.join("\n")) };
  }
}

function objectLines(annotation: DatasetAnnotation, name: string): string[] {
  const [x, y, width, height] = boxOf(annotation);
  const left = Math.round(x) + 1;
  const top = Math.round(y) + 1;
  const right = Math.max(left, Math.round(x + width));
  const bottom = Math.max(top, Math.round(y + height));
  const flag = (tag: string, value: boolean | undefined) =>
    value === undefined ? [] : [`    <${tag}>${Number(value)}</${tag}>`];
  return [
    `  <object>`,
    `    <name>${escape(name)}</name>`,
    `    <pose>Unspecified</pose>`,
    ...flag("truncated", annotation.truncated ?? false),
    ...flag("occluded", annotation.occluded),
    ...flag("difficult", annotation.crowd || (annotation.difficult ?? false)),
    `    <bndbox>`,
    `      <xmin>${left}</xmin>`,
    `      <ymin>${top}</ymin>`,
    `      <xmax>${right}</xmax>`,
    `      <ymax>${bottom}</ymax>`,
    `    </bndbox>`,
    `  </object>`,
  ];
}

/** The five characters of XML, and none of the control characters that XML 1.0 cannot hold. */
function escape(text: string): string {
  const entities: { readonly [character: string]: string } = {
    "&": "&amp;",
    "<": "&lt;",
    ">": "&gt;",
    '"': "&quot;",
    "'": "&apos;",
  };

  return text
    .replace(/[\u0000-\u0008\u000b\u000c\u000e-\u001f]/g, "")
    .replace(/[&<>"']/g, (c) => entities[c] ?? c);
}

const parser = new XMLParser({
  parseTagValue: false,
  ignoreAttributes: true,
  processEntities: true,
  isArray: (name) => name === "object",
});

export type TextFile = { readonly path: string; readonly text: string };

/**
 * Reads Pascal VOC files, one an image, in order of path. Classes are numbered from 1 in order of name, images in
 * order of the files. Throws FormatError that names the file and the object.
 */
export function readVoc(files: readonly TextFile[]): Dataset {
  const sorted = files.toSorted((a, b) => (a.path < b.path ? -1 : 1));
  const parsed = sorted.map((file, i) => parseVoc(file, i + 1));
  const names = [...new Set(parsed.flatMap(({ objects }) => objects.map(({ name }) => name)))].sort();
  const classes = names.map((name, i) => ({ id: i + 1, name }));
  const idOf = new Map(classes.map(({ id, name }) => [name, id]));
  const seen = new Set<string>();
  for (const { image, path } of parsed) {
    if (seen.has(image.fileName))
      throw new FormatError(path, `filename ${describe(image.fileName)} occurs twice`);
    seen.add(image.fileName);
  }
  let id = 0;
  return {
    images: parsed.map(({ image }) => image),
    classes,
    annotations: parsed.flatMap(({ image, objects }) =>
      objects.map(({ name, box, ...flags }) => ({
        id: ++id,
        imageId: image.id,
        classId: idOf.get(name) ?? 0,
        shape: { kind: "box", box } as const,
        crowd: false,
        ...flags,
      })),
    ),
  };
}

function parseVoc({ path, text }: TextFile, id: number) {
  // Entities of its own could make a small file expand without end; VOC has no use for a document type.
  if (/<!DOCTYPE/i.test(text)) throw new FormatError(path, "has a document type, which is not read");
  const verdict = XMLValidator.validate(text);
  if (verdict !== true) {
    throw new FormatError(
      path,
      `is not valid XML: line ${verdict.err.line}: ${verdict.err.msg.replaceAll(/\s+/g, " ")}`,
    );
  }
  const root = asFields(parser.parse(text), path);
  if (root.annotation === undefined) throw new FormatError(path, "has no <annotation>");
  const annotation = asFields(root.annotation, path);
  const size = asFields(annotation.size, `${path}: size`);
  const folder = typeof annotation.folder === "string" ? annotation.folder : "";
  const name = asText(annotation.filename, path, "filename");
  const image = {
    id,
    fileName: folder === "" ? name : `${folder}/${name}`,
    ...asSize(whole(size.width), whole(size.height), `${path}: size`),
  };
  const objects = annotation.object === undefined ? [] : asList(annotation.object, path, "object");
  return { path, image, objects: objects.map((value, i) => parseObject(value, `${path}: object ${i + 1}`)) };
}

function parseObject(value: unknown, record: string) {
  const fields = asFields(value, record);
  const bounds = asFields(fields.bndbox, `${record}: bndbox`);
  const read = (key: string) => asCoordinate(whole(bounds[key]), record, key);
  const [left, top, right, bottom] = [read("xmin"), read("ymin"), read("xmax"), read("ymax")];
  if (right < left || bottom < top) throw new FormatError(record, `the box ends before it begins`);
  const box: Box = [left - 1, top - 1, right - left + 1, bottom - top + 1];
  return {
    name: asText(fields.name, record, "name"),
    box,
    ...present({
      truncated: findVocFlag(fields, "truncated", record),
      occluded: findVocFlag(fields, "occluded", record),
      difficult: findVocFlag(fields, "difficult", record),
    }),
  };
}

function whole(value: unknown): unknown {
  return typeof value === "string" && value.trim() !== "" ? Number(value) : value;
}

function findVocFlag(fields: Fields, key: string, record: string): boolean | undefined {
  const value = fields[key];
  if (value === undefined || value === "") return undefined;
  if (value === "0" || value === "1") return value === "1";
  throw new FormatError(record, `${key} is ${describe(value)}, neither 0 nor 1`);
}
