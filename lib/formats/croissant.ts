import type { DatasetClass } from "./dataset";

export type CroissantFile = {
  /** Path in the release, with "/" between folders. */
  readonly path: string;
  readonly sha256: string;
  readonly sizeBytes: number;
  /** MIME type. */
  readonly encodingFormat: string;
};

export type CroissantInput = {
  readonly name: string;
  readonly description: string;
  /** Address of the licence text. */
  readonly license: string;
  readonly url: string;
  readonly version: string;
  /** ISO 8601 date. */
  readonly datePublished: string;
  readonly creators: readonly string[];
  readonly citeAs?: string;
  readonly classes: readonly DatasetClass[];
  readonly files: readonly CroissantFile[];
  /** Path of the COCO file among `files`; its images, classes and annotations become record sets. */
  readonly cocoPath: string;
};

/** The context that the Croissant specification prescribes, version 1.1 (MLCommons). */
const CONTEXT = {
  "@language": "en",
  "@vocab": "https://schema.org/",
  arrayShape: "cr:arrayShape",
  citeAs: "cr:citeAs",
  column: "cr:column",
  conformsTo: "dct:conformsTo",
  containedIn: "cr:containedIn",
  cr: "http://mlcommons.org/croissant/",
  data: { "@id": "cr:data", "@type": "@json" },
  dataType: { "@id": "cr:dataType", "@type": "@vocab" },
  dct: "http://purl.org/dc/terms/",
  equivalentProperty: "cr:equivalentProperty",
  examples: { "@id": "cr:examples", "@type": "@json" },
  extract: "cr:extract",
  field: "cr:field",
  fileObject: "cr:fileObject",
  fileProperty: "cr:fileProperty",
  fileSet: "cr:fileSet",
  format: "cr:format",
  includes: "cr:includes",
  isArray: "cr:isArray",
  isLiveDataset: "cr:isLiveDataset",
  jsonPath: "cr:jsonPath",
  key: "cr:key",
  md5: "cr:md5",
  parentField: "cr:parentField",
  path: "cr:path",
  rai: "http://mlcommons.org/croissant/RAI/",
  recordSet: "cr:recordSet",
  references: "cr:references",
  regex: "cr:regex",
  repeated: "cr:repeated",
  replace: "cr:replace",
  samplingRate: "cr:samplingRate",
  sc: "https://schema.org/",
  separator: "cr:separator",
  source: "cr:source",
  subField: "cr:subField",
  transform: "cr:transform",
};

/**
 * Croissant 1.1 metadata of a dataset release (Akhtar et al., 2024; MLCommons specification): every file with its SHA-256,
 * and the images, classes and annotations of its COCO file as record sets. The text is the same for the same input.
 */
export function croissantText(input: CroissantInput): string {
  const {
    name,
    description,
    license,
    url,
    version,
    datePublished,
    creators,
    citeAs,
    classes,
    files,
    cocoPath,
  } = input;
  const metadata = {
    "@context": CONTEXT,
    "@type": "sc:Dataset",
    conformsTo: "http://mlcommons.org/croissant/1.1",
    name,
    description,
    license,
    url,
    version,
    datePublished,
    creator: creators.map((creator) => ({ "@type": "sc:Organization", name: creator })),
    ...(citeAs === undefined ? {} : { citeAs }),
    isLiveDataset: false,
    distribution: files.map((file) => ({
      "@type": "cr:FileObject",
      "@id": file.path,
      name: file.path,
      contentUrl: file.path,
      contentSize: `${file.sizeBytes} B`,
      encodingFormat: file.encodingFormat,
      sha256: file.sha256,
    })),
    recordSet: [
      recordSet("images", cocoPath, "$.images[*]", "id", [
        ["id", "sc:Integer"],
        ["file_name", "sc:Text"],
        ["width", "sc:Integer"],
        ["height", "sc:Integer"],
      ]),
      {
        "@type": "cr:RecordSet",
        "@id": "categories",
        name: "categories",
        dataType: "sc:Enumeration",
        key: { "@id": "categories/id" },
        field: [plainField("categories", "id", "sc:Integer"), plainField("categories", "name", "sc:Text")],
        data: classes.map((item) => ({ "categories/id": item.id, "categories/name": item.name })),
      },
      recordSet("annotations", cocoPath, "$.annotations[*]", "id", [
        ["id", "sc:Integer"],
        ["image_id", "sc:Integer", "images/id"],
        ["category_id", "sc:Integer", "categories/id"],
        ["bbox", "cr:BoundingBox"],
        ["segmentation", "cr:SegmentationMask"],
        ["area", "sc:Float"],
        ["iscrowd", "sc:Integer"],
      ]),
    ],
  };
  return `${JSON.stringify(metadata, null, 2)}\n`;
}

type FieldRow = readonly [name: string, dataType: string, references?: string];

function recordSet(name: string, fileId: string, jsonPath: string, key: string, rows: readonly FieldRow[]) {
  return {
    "@type": "cr:RecordSet",
    "@id": name,
    name,
    key: { "@id": `${name}/${key}` },
    field: rows.map(([field, dataType, references]) => ({
      ...plainField(name, field, dataType),
      source: { fileObject: { "@id": fileId }, extract: { jsonPath: `${jsonPath}.${field}` } },
      ...(references === undefined ? {} : { references: { field: { "@id": references } } }),
    })),
  };
}

function plainField(set: string, name: string, dataType: string) {
  return { "@type": "cr:Field", "@id": `${set}/${name}`, name, dataType };
}
