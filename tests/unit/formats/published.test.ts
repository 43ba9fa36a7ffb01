import { spawnSync } from "node:child_process";
import path from "node:path";
import Ajv from "ajv";
import addFormats from "ajv-formats";
import { describe, expect, it } from "vitest";
import { openCoco } from "@/lib/formats/cocoFile";
import { toDataset, toSource } from "@/lib/formats/dataset";
import { writeGeoJson } from "@/lib/formats/geojson";
import { writeVoc } from "@/lib/formats/voc";
import { writeWebAnnotation } from "@/lib/formats/webAnnotation";

/**
 * What we write against what is published. The schemas below are written out from the texts, section by section:
 * RFC 7946 (GeoJSON, sections 3.1 to 3.3) and the Web Annotation Data Model (W3C, 2017, sections 3.1 to 4.2);
 * neither text comes with a schema of its own. VOC is read by Python's ElementTree where Python is there.
 */
const opened = openCoco(path.resolve(import.meta.dirname, "../../support/example/truth.coco.json"));
const example = toDataset(opened);
opened.close();

const ajv = new Ajv({ strict: false, allErrors: true });
addFormats(ajv);

const position = { type: "array", minItems: 2, items: { type: "number" } };
const linearRing = { type: "array", minItems: 4, items: position };
const polygon = { type: "array", minItems: 1, items: linearRing };
const geometry = (type: string, coordinates: object) => ({
  type: "object",
  required: ["type", "coordinates"],
  properties: { type: { const: type }, coordinates },
});
const GEOJSON = {
  type: "object",
  required: ["type", "features"],
  not: { anyOf: [{ required: ["coordinates"] }, { required: ["geometry"] }] }, // section 7.1
  properties: {
    type: { const: "FeatureCollection" },
    features: {
      type: "array",
      items: {
        type: "object",
        required: ["type", "properties", "geometry"],
        properties: {
          type: { const: "Feature" },
          id: { type: ["string", "number"] },
          properties: { type: ["object", "null"] },
          geometry: {
            anyOf: [
              { type: "null" },
              geometry("Polygon", polygon),
              geometry("MultiPolygon", { type: "array", items: polygon }),
            ],
          },
        },
      },
    },
  },
};

const selector = {
  type: "object",
  required: ["type", "value"],
  properties: { type: { enum: ["FragmentSelector", "SvgSelector"] }, value: { type: "string" } },
  if: { properties: { type: { const: "FragmentSelector" } } },
  then: {
    required: ["conformsTo"],
    properties: {
      conformsTo: { const: "http://www.w3.org/TR/media-frags/" },
      value: { pattern: "^xywh=pixel:\\d+,\\d+,\\d+,\\d+$" },
    },
  },
  else: { properties: { value: { pattern: "^<svg[^>]*>.*</svg>$" } } },
};
const ANNOTATION = {
  type: "object",
  required: ["id", "type", "target"],
  properties: {
    id: { type: "string", format: "uri-reference" },
    type: { const: "Annotation" },
    body: { type: ["object", "array", "string"] },
    target: {
      type: "object",
      required: ["source", "selector"],
      properties: { source: { type: ["string", "object"] }, selector },
    },
  },
};

function listOf(value: unknown): unknown[] {
  if (Array.isArray(value)) return value;
  if (typeof value !== "object" || value === null) return [];
  const { items, first } = value as { items?: unknown; first?: { items?: unknown } };
  return listOf(items ?? first?.items);
}

const text = (bytes: Uint8Array) => new TextDecoder().decode(bytes);

describe("what is written keeps to what is published", () => {
  it("GeoJSON: RFC 7946, with closed rings", () => {
    const content: unknown = JSON.parse([...writeGeoJson(toSource(example))].join(""));
    const check = ajv.compile(GEOJSON);
    expect(check(content), JSON.stringify(check.errors)).toBe(true);
    for (const ring of ringsIn(content)) expect(ring.at(-1)).toEqual(ring[0]);
  });

  it("Web Annotation: context, and target with a media fragment or SVG", () => {
    const content: unknown = JSON.parse([...writeWebAnnotation(toSource(example))].join(""));
    expect(JSON.stringify(content)).toMatch(/"@context":\[?"http:\/\/www\.w3\.org\/ns\/anno\.jsonld"/);
    const annotations = listOf(content);
    expect(annotations.length).toBeGreaterThanOrEqual(example.annotations.length);
    const check = ajv.compile(ANNOTATION);
    for (const annotation of annotations) expect(check(annotation), JSON.stringify(check.errors)).toBe(true);
  });

  it("Pascal VOC: an independent reader finds name, size and whole boxes inside the picture", () => {
    const script = `
import sys, json, xml.etree.ElementTree as E
out = []
for text in json.load(sys.stdin):
    root = E.fromstring(text)
    assert root.tag == "annotation"
    w, h = int(root.find("size/width").text), int(root.find("size/height").text)
    for o in root.findall("object"):
        b = [int(o.find("bndbox/" + k).text) for k in ("xmin", "ymin", "xmax", "ymax")]
        assert 1 <= b[0] <= b[2] <= w and 1 <= b[1] <= b[3] <= h, b
        out.append(o.find("name").text)
print(json.dumps(out))`;
    const files = [...writeVoc(toSource(example))].map(({ bytes }) => text(bytes));
    const python = spawnSync("python3", ["-c", script], { input: JSON.stringify(files), encoding: "utf8" });
    if (python.error) {
      console.warn("skipped: python3 is not there to read VOC");
      return;
    }
    expect(python.stderr).toBe("");
    const names: unknown = JSON.parse(python.stdout);
    const nameOf = new Map(example.classes.map(({ id, name }) => [id, name]));
    expect(names).toHaveLength(example.annotations.length);
    expect([...new Set(names as string[])].sort()).toEqual(
      [...new Set(example.annotations.map(({ classId }) => nameOf.get(classId)))].sort(),
    );
  });
});

function ringsIn(content: unknown): number[][][] {
  const { features } = content as { features: { geometry: { type: string; coordinates: unknown } | null }[] };
  return features.flatMap(({ geometry: own }) => {
    if (own === null) return [];
    const polygons = own.type === "Polygon" ? [own.coordinates] : (own.coordinates as unknown[]);
    return polygons.flatMap((rings) => rings as number[][][]);
  });
}

it("the schemas themselves refuse what is wrong", () => {
  expect(ajv.compile(GEOJSON)({ type: "FeatureCollection", features: [{ type: "Feature" }] })).toBe(false);
  expect(ajv.compile(ANNOTATION)({ id: "a", type: "Annotation", target: "x" })).toBe(false);
});
