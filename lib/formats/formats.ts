import { readdirSync, readFileSync, statSync } from "node:fs";
import path from "node:path";
import { openCoco } from "./cocoFile";
import { writeCoco } from "./coco";
import { writeCsv } from "./csv";
import { FormatError, toSource, type DatasetSource, type OutputFile } from "./dataset";
import { readGeoJson, writeGeoJson } from "./geojson";
import { INSTANCES_FILE, readMaskPng, writeMaskPng, type MaskPngOptions } from "./maskPng";
import { readVoc, writeVoc } from "./voc";
import { readWebAnnotation, writeWebAnnotation } from "./webAnnotation";

/** Formats that are read and written; "voc" and "mask" are folders, the others one file. */
export const READ_FORMATS = ["coco", "voc", "geojson", "webannotation", "mask"] as const;
export const WRITE_FORMATS = [...READ_FORMATS, "csv"] as const;
export type ReadFormat = (typeof READ_FORMATS)[number];
export type WriteFormat = (typeof WRITE_FORMATS)[number];

export type OpenDataset = { readonly source: DatasetSource; readonly close: () => void };

type OnProgress = (done: number, all: number) => void;

/** Opens a dataset; COCO is read image by image, the others as a whole. Throws FormatError and the errors of the file system. */
export function openDataset(format: ReadFormat, place: string, onProgress?: OnProgress): OpenDataset {
  const held = (source: DatasetSource): OpenDataset => ({ source, close: () => undefined });
  switch (format) {
    case "coco": {
      const file = openCoco(place, onProgress ? { onProgress } : {});
      return { source: file, close: file.close };
    }
    case "voc":
      return held(toSource(readVoc(listXml(place))));
    case "geojson":
      return held(toSource(readGeoJson(readJson(place))));
    case "webannotation":
      return held(toSource(readWebAnnotation(readJson(place))));
    case "mask": {
      const instances = readJson(path.join(place, INSTANCES_FILE));
      return held(toSource(readMaskPng(instances, (file) => readFileSync(inside(place, file)))));
    }
  }
}

/** What a writer makes: the text of one file, or the files of a folder, in both cases a piece at a time. */
export type Written =
  | { readonly kind: "file"; readonly text: Iterable<string> }
  | { readonly kind: "folder"; readonly files: Iterable<OutputFile> };

/** Writes a dataset; the same dataset gives the same bytes. */
export function writeDataset(
  format: WriteFormat,
  source: DatasetSource,
  options: MaskPngOptions = {},
): Written {
  switch (format) {
    case "coco":
      return { kind: "file", text: writeCoco(source) };
    case "geojson":
      return { kind: "file", text: writeGeoJson(source) };
    case "webannotation":
      return { kind: "file", text: writeWebAnnotation(source) };
    case "csv":
      return { kind: "file", text: writeCsv(source) };
    case "voc":
      return { kind: "folder", files: writeVoc(source) };
    case "mask":
      return { kind: "folder", files: writeMaskPng(source, options) };
  }
}

function readJson(file: string): unknown {
  const text = readFileSync(file, "utf8");
  try {
    return JSON.parse(text);
  } catch (cause) {
    throw new FormatError("", "is not valid JSON", { cause });
  }
}

function listXml(folder: string) {
  if (!statSync(folder).isDirectory()) throw new FormatError("", "is not a folder of XML files");
  const names = readdirSync(folder, { recursive: true, encoding: "utf8" }).filter((name) =>
    /\.xml$/i.test(name),
  );
  if (names.length === 0) throw new FormatError("", "the folder has no XML file");
  return names.sort().map((name) => ({
    path: name.replaceAll(path.sep, "/"),
    text: readFileSync(path.join(folder, name), "utf8"),
  }));
}

/** A path that a file names, kept inside the folder of that file. */
function inside(folder: string, file: string): string {
  const resolved = path.resolve(folder, file);
  if (!resolved.startsWith(path.resolve(folder) + path.sep))
    throw new FormatError(file, "lies outside the folder");
  return resolved;
}
