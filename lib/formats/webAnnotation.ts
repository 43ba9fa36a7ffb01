import { ringOfBox } from "@/lib/geometry/box";
import { rasteriseRings } from "@/lib/geometry/mask";
import { maskFromRle, rleFromMask, type LabelShape } from "@/lib/geometry/rle";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Point, Rings } from "@/lib/geometry/types";
import { contextOf } from "./cocoFile";
import { parseCocoClass, parseCocoImage, type CocoContext } from "./coco";
import {
  classNames,
  FormatError,
  type Dataset,
  type DatasetAnnotation,
  type DatasetImage,
  type DatasetSource,
} from "./dataset";
import {
  asCoordinate,
  asFields,
  asList,
  asText,
  asWhole,
  describe,
  findFlag,
  present,
  type Fields,
} from "./fields";
import { extraFields, parseExtras } from "./properties";

const CONTEXT = ["http://www.w3.org/ns/anno.jsonld", { schema: "https://schema.org/" }];
const MEDIA_FRAGMENTS = "http://www.w3.org/TR/media-frags/";

/**
 * Writes a dataset as one W3C Annotation Page (Web Annotation Data Model, 2017), a piece at a time. A box of whole pixels
 * is a FragmentSelector (xywh=pixel, which holds only whole numbers), everything else an SvgSelector whose path is
 * filled by the even-odd rule. What the model has no word for stands as schema.org property values.
 */
export function* writeWebAnnotation(source: DatasetSource): Generator<string> {
  const nameOf = classNames(source.classes);
  yield `{"@context":${JSON.stringify(CONTEXT)},\n"id":"#page","type":"AnnotationPage",\n"schema:about":[`;
  let count = 0;
  const separator = () => (count++ === 0 ? "\n" : ",\n");
  for (const image of source.images) yield separator() + JSON.stringify(imageNode(image));
  for (const { id, name } of source.classes) {
    yield (
      separator() +
      JSON.stringify({ "@type": "schema:DefinedTerm", "schema:termCode": id, "schema:name": name })
    );
  }
  yield `],\n"items":[`;
  count = 0;
  for (const image of source.images) {
    for (const annotation of source.annotationsOf(image.id)) {
      yield separator() + JSON.stringify(annotationNode(annotation, image, nameOf(annotation.classId)));
    }
  }
  yield "]}\n";
}

function imageNode({ id, fileName, width, height, sha256 }: DatasetImage): Fields {
  return present({
    "@type": "schema:ImageObject",
    "schema:identifier": id,
    "schema:name": fileName,
    "schema:width": width,
    "schema:height": height,
    "schema:sha256": sha256,
  });
}

function annotationNode(annotation: DatasetAnnotation, image: DatasetImage, className: string): Fields {
  const { id, shape, crowd } = annotation;
  const stated = { shape: shape.kind, crowd, ...extraFields(annotation) };
  return {
    id: `#annotation-${id}`,
    type: "Annotation",
    motivation: "classifying",
    body: { type: "TextualBody", purpose: "classifying", value: className },
    target: { source: encodeURI(image.fileName), selector: selectorOf(shape, image) },
    "schema:additionalProperty": Object.entries(stated).map(([name, value]) => ({
      "@type": "schema:PropertyValue",
      "schema:name": name,
      "schema:value": value,
    })),
  };
}

function selectorOf(shape: LabelShape, { width, height }: DatasetImage): Fields {
  if (shape.kind === "box" && shape.box.every((value) => Number.isInteger(value) && value >= 0)) {
    return {
      type: "FragmentSelector",
      conformsTo: MEDIA_FRAGMENTS,
      value: `xywh=pixel:${shape.box.join(",")}`,
    };
  }
  const rings =
    shape.kind === "box"
      ? [ringOfBox(shape.box)]
      : shape.kind === "polygon"
        ? shape.rings
        : traceMask(maskFromRle(shape.rle));
  const path = rings.map((ring) => `M ${ring.map(([x, y]) => `${x} ${y}`).join(" L ")} Z`).join(" ");
  return {
    type: "SvgSelector",
    value: `<svg xmlns="http://www.w3.org/2000/svg" width="${width}" height="${height}"><path fill-rule="evenodd" d="${path}"/></svg>`,
  };
}

/** Reads what `writeWebAnnotation` writes. Throws FormatError for the first record that is wrong. */
export function readWebAnnotation(value: unknown): Dataset {
  const page = asFields(value, "");
  if (page.type !== "AnnotationPage")
    throw new FormatError("", `type is ${describe(page.type)}, not "AnnotationPage"`);
  const about = asList(page["schema:about"], "", "schema:about").map((node, i) => ({
    record: `schema:about[${i}]`,
    fields: asFields(node, `schema:about[${i}]`),
  }));
  const images = about
    .filter(({ fields }) => fields["@type"] === "schema:ImageObject")
    .map(({ record, fields }) =>
      parseCocoImage(
        present({
          id: fields["schema:identifier"],
          file_name: fields["schema:name"],
          width: fields["schema:width"],
          height: fields["schema:height"],
          sha256: fields["schema:sha256"],
        }),
        record,
      ),
    );
  const classes = about
    .filter(({ fields }) => fields["@type"] === "schema:DefinedTerm")
    .map(({ record, fields }) =>
      parseCocoClass({ id: fields["schema:termCode"], name: fields["schema:name"] }, record),
    );
  const context = contextOf({ images, classes });
  const classIdOf = new Map(classes.map(({ id, name }) => [name, id]));
  const annotations = asList(page.items, "", "items").map((item, i) =>
    parseItem(item, `items[${i}]`, i + 1, context, classIdOf),
  );
  return { images, classes, annotations };
}

function parseItem(
  value: unknown,
  record: string,
  fallbackId: number,
  { imageByName }: CocoContext,
  classIdOf: ReadonlyMap<string, number>,
): DatasetAnnotation {
  const item = asFields(value, record);
  const body = asFields(item.body, `${record}.body`);
  const className = asText(body.value, record, "body.value");
  const classId = classIdOf.get(className);
  if (classId === undefined)
    throw new FormatError(record, `body.value ${describe(className)} is not listed as a term`);
  const target = asFields(item.target, `${record}.target`);
  const source = asText(target.source, record, "target.source");
  const image = imageByName.get(decoded(source));
  if (!image) throw new FormatError(record, `target.source ${describe(source)} is not listed as an image`);
  const stated = statedProperties(item["schema:additionalProperty"], record);
  const number = /^#annotation-(\d+)$/.exec(typeof item.id === "string" ? item.id : "")?.[1];
  return {
    id: number === undefined ? fallbackId : asWhole(Number(number), record, "id"),
    imageId: image.id,
    classId,
    shape: parseSelector(asFields(target.selector, `${record}.target.selector`), stated.shape, image, record),
    crowd: findFlag(stated.crowd, record, "crowd") ?? false,
    ...parseExtras(stated, record),
  };
}

function decoded(source: string): string {
  try {
    return decodeURI(source);
  } catch {
    // Not percent-encoded at all: then it is the name itself.
    return source;
  }
}

function statedProperties(value: unknown, record: string): Fields {
  if (value === undefined) return {};
  const list = asList(value, record, "schema:additionalProperty").map((node) => asFields(node, record));
  return Object.fromEntries(list.map((node) => [String(node["schema:name"]), node["schema:value"]]));
}

const NUMBER = "-?(?:\\d+\\.?\\d*|\\.\\d+)(?:e[+-]?\\d+)?";

function parseSelector(selector: Fields, kind: unknown, image: DatasetImage, record: string): LabelShape {
  const value = asText(selector.value, record, "selector.value");
  if (selector.type === "FragmentSelector") {
    const match = new RegExp(`^xywh=(?:pixel:)?(${NUMBER}),(${NUMBER}),(${NUMBER}),(${NUMBER})$`, "i").exec(
      value,
    );
    if (!match) throw new FormatError(record, `selector.value ${describe(value)} is no xywh=pixel fragment`);
    const [x = 0, y = 0, width = 0, height = 0] = match
      .slice(1)
      .map((number) => asCoordinate(Number(number), record, "a number of the fragment"));
    return { kind: "box", box: [x, y, width, height] };
  }
  if (selector.type !== "SvgSelector") {
    throw new FormatError(
      record,
      `selector is ${describe(selector.type)}, not FragmentSelector or SvgSelector`,
    );
  }
  const path = /<path\b[^>]*\bd="([^"]*)"/.exec(value)?.[1];
  if (path === undefined) throw new FormatError(record, "the SVG of the selector has no <path d>");
  const rings = parsePath(path, record);
  if (kind === "mask") {
    return {
      kind: "mask",
      rle: rleFromMask(rasteriseRings(rings, image.width, image.height), image.width, image.height),
    };
  }
  if (kind !== "box") return { kind: "polygon", rings };
  const [from, , to] = rings[0] ?? [];
  if (!from || !to) throw new FormatError(record, "the path of the box has fewer than four corners");
  const box: Box = [from[0], from[1], to[0] - from[0], to[1] - from[1]];
  return { kind: "box", box };
}

/** Straight lines between absolute points only: M, L and Z. */
function parsePath(path: string, record: string): Rings {
  const tokens = path.trim().split(/[\s,]+/);
  const rings: Point[][] = [];
  for (let i = 0; i < tokens.length;) {
    const token = tokens[i] ?? "";
    if (token === "M") rings.push([]);
    else if (token === "Z") {
      i++;
      continue;
    } else if (token !== "L")
      throw new FormatError(record, `the path has ${describe(token)}, only M, L and Z are read`);
    const [x, y] = [Number(tokens[i + 1]), Number(tokens[i + 2])];
    const ring = rings[rings.length - 1];
    if (!ring || tokens[i + 2] === undefined || !Number.isFinite(x) || !Number.isFinite(y)) {
      throw new FormatError(record, "the path has a point that is not two finite numbers");
    }
    ring.push([asCoordinate(x, record, "a coordinate"), asCoordinate(y, record, "a coordinate")]);
    i += 3;
  }
  if (rings.some((ring) => ring.length < 3))
    throw new FormatError(record, "the path has a ring of fewer than three points");
  return rings;
}
