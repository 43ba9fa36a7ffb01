import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import sharp from "sharp";
import { afterAll, describe, expect, it } from "vitest";
import yauzl from "yauzl";
import { bagOf, bagTagFiles, sha256Of } from "@/lib/formats/bagit";
import { writeCoco } from "@/lib/formats/coco";
import { openCoco } from "@/lib/formats/cocoFile";
import { croissantText } from "@/lib/formats/croissant";
import { writeCsv } from "@/lib/formats/csv";
import {
  toDataset,
  toSource,
  type Dataset,
  type DatasetAnnotation,
  type OutputFile,
} from "@/lib/formats/dataset";
import { readGeoJson, writeGeoJson } from "@/lib/formats/geojson";
import { INSTANCES_FILE, readMaskPng, writeMaskPng } from "@/lib/formats/maskPng";
import { safePath, uniquePaths, withExtension } from "@/lib/formats/names";
import { decodePng, encodePng, paletteColour } from "@/lib/formats/png";
import { readVoc, writeVoc } from "@/lib/formats/voc";
import { readWebAnnotation, writeWebAnnotation } from "@/lib/formats/webAnnotation";
import { zipBytes } from "@/lib/formats/zip";
import { ringsArea } from "@/lib/geometry/region";
import { rleFromString } from "@/lib/geometry/rle";

const folder = mkdtempSync(path.join(tmpdir(), "formats-"));
afterAll(() => rmSync(folder, { recursive: true }));
const EXAMPLE = path.resolve(import.meta.dirname, "../../support/example/truth.coco.json");
const text = (bytes: Uint8Array) => new TextDecoder().decode(bytes);

function openText(content: string): Dataset {
  const file = path.join(folder, "in.json");
  writeFileSync(file, content);
  const opened = openCoco(file);
  const dataset = toDataset(opened);
  opened.close();
  return dataset;
}

/** Every kind of shape and every optional field, with awkward names and digits. */
const full: Dataset = {
  images: [
    { id: 7, fileName: "wrack line/été & <1>.jpg", width: 50, height: 40, sha256: "ab".repeat(32) },
    { id: 3, fileName: "empty.png", width: 9, height: 9 },
  ],
  classes: [
    { id: 2, name: 'bottle, "green"' },
    { id: 9, name: "cap <small> & 'red'" },
  ],
  annotations: [
    {
      id: 5,
      imageId: 7,
      classId: 2,
      crowd: false,
      shape: {
        kind: "polygon",
        rings: [
          [
            [0.1, 0.2],
            [30.123456789012345, 1e-7],
            [20, 20.3],
          ],
        ],
      },
      score: 0.30000000000000004,
      support: 0.8,
      spread: 0.01,
      truncated: true,
      occluded: false,
    },
    {
      id: 6,
      imageId: 7,
      classId: 9,
      crowd: false,
      shape: { kind: "box", box: [1, 2, 10, 12] },
      difficult: true,
    },
    { id: 8, imageId: 7, classId: 9, crowd: false, shape: { kind: "box", box: [1.5, 2.25, 10, 12] } },
    {
      id: 9,
      imageId: 7,
      classId: 2,
      crowd: true,
      shape: { kind: "mask", rle: { width: 50, height: 40, counts: [805, 10, 30, 10, 1145] } },
      areaPx2: 20,
      box: [20, 5, 2, 10],
    },
  ],
};
const withoutDerived = ({ box: _box, areaPx2: _area, ...rest }: DatasetAnnotation) => rest;

describe("COCO", () => {
  it("comes back with every coordinate, run and field", () => {
    const back = openText([...writeCoco(toSource(full))].join(""));
    expect(back.images).toEqual(full.images);
    expect(back.classes).toEqual(full.classes);
    expect(back.annotations.map(withoutDerived)).toEqual(full.annotations.map(withoutDerived));
    const third = openText([...writeCoco(toSource(back))].join(""));
    expect(third).toEqual(back);
  });

  it("is written byte for byte the same again", () => {
    const once = openCoco(EXAMPLE);
    const first = [...writeCoco(once)].join("");
    expect([...writeCoco(toSource(openText(first)))].join("")).toBe(first);
    once.close();
  });

  it("carries a hole as one outline of the same area", () => {
    const holed: Dataset = {
      ...full,
      annotations: [
        {
          id: 1,
          imageId: 7,
          classId: 2,
          crowd: false,
          shape: {
            kind: "polygon",
            rings: [
              [
                [0, 0],
                [20, 0],
                [20, 20],
                [0, 20],
              ],
              [
                [5, 5],
                [5, 15],
                [15, 15],
                [15, 5],
              ],
            ],
          },
        },
      ],
    };
    const [back] = openText([...writeCoco(toSource(holed))].join("")).annotations;
    expect(back?.shape.kind === "polygon" && back.shape.rings).toHaveLength(1);
    expect(back?.shape.kind === "polygon" && ringsArea(back.shape.rings)).toBe(300);
  });

  it("means the union where polygons of one annotation overlap", () => {
    const content = JSON.stringify({
      images: [{ id: 1, file_name: "a.jpg", width: 50, height: 50 }],
      categories: [{ id: 1, name: "rope" }],
      annotations: [
        {
          id: 1,
          image_id: 1,
          category_id: 1,
          segmentation: [
            [0, 0, 10, 0, 10, 10, 0, 10],
            [5, 0, 15, 0, 15, 10, 5, 10],
          ],
        },
      ],
    });
    const [annotation] = openText(content).annotations;
    expect(annotation?.shape.kind === "polygon" && ringsArea(annotation.shape.rings)).toBeCloseTo(150, 6);
  });

  it("reads a list of results against the images and classes that it refers to", () => {
    const file = path.join(folder, "results.json");
    writeFileSync(
      file,
      JSON.stringify([
        { file_name: "empty.png", category_id: 2, bbox: [1, 1, 2, 2], score: 0.5 },
        { image_id: 7, category_id: 9, bbox: [0, 0, 1, 1] },
      ]),
    );
    const results = openCoco(file, { base: full });
    expect(results.annotationsOf(3)).toMatchObject([{ classId: 2, score: 0.5 }]);
    expect(results.annotationsOf(7)).toMatchObject([{ classId: 9, id: 2 }]);
    results.close();
    expect(() => openCoco(file)).toThrow(/list of results/);
  });
});

describe("GeoJSON", () => {
  it("comes back whole", () => {
    const content = [...writeGeoJson(toSource(full))].join("");
    expect(readGeoJson(JSON.parse(content))).toEqual(full);
  });

  it("closes its rings, and turns outer rings and holes as RFC 7946 wants them", () => {
    const parsed = JSON.parse([...writeGeoJson(toSource(full))].join("")) as {
      features: { geometry: { type: string; coordinates: [number, number][][] } }[];
    };
    const ring = parsed.features[0]!.geometry.coordinates[0]!;
    expect(ring[0]).toEqual(ring.at(-1));
    const twiceArea = ring.reduce((sum, [x, y], i) => {
      const [nextX, nextY] = ring[(i + 1) % ring.length]!;
      return sum + x * nextY - nextX * y;
    }, 0);
    expect(twiceArea).toBeGreaterThan(0);
  });
});

describe("Web Annotation", () => {
  it("comes back whole", () => {
    const content = [...writeWebAnnotation(toSource(full))].join("");
    expect(readWebAnnotation(JSON.parse(content))).toEqual(full);
  });

  it("uses a pixel fragment for whole boxes, which cannot hold fractions", () => {
    const content = [...writeWebAnnotation(toSource(full))].join("");
    expect(content).toContain('"xywh=pixel:1,2,10,12"');
    expect(content).not.toContain("xywh=pixel:1.5");
  });
});

describe("Pascal VOC", () => {
  const whole: Dataset = { ...full, annotations: full.annotations.filter(({ id }) => id === 6) };

  it("counts from 1, both ends included, and brings whole boxes back to the pixel", () => {
    const files = [...writeVoc(toSource(whole))].map(({ path: name, bytes }) => ({
      path: name,
      text: text(bytes),
    }));
    expect(files.map((file) => file.path)).toEqual(["wrack line/été & _1_.xml", "empty.xml"]);
    expect(files[0]?.text).toContain("<xmin>2</xmin>");
    expect(files[0]?.text).toContain("<xmax>11</xmax>");
    const back = readVoc(files);
    expect(back.images.map(({ fileName }) => fileName)).toEqual(["empty.png", "wrack line/été & <1>.jpg"]);
    expect(back.classes).toEqual([{ id: 1, name: "cap <small> & 'red'" }]);
    expect(back.annotations).toMatchObject([
      { shape: { box: [1, 2, 10, 12] }, difficult: true, truncated: false },
    ]);
  });
});

describe("instance masks", () => {
  it("come back to the pixel where nothing overlaps, at 8 and 16 bits and with a palette", () => {
    const many: Dataset = {
      ...full,
      annotations: Array.from({ length: 300 }, (_, i) => ({
        id: i + 1,
        imageId: 7,
        classId: 2,
        crowd: false,
        shape: { kind: "box" as const, box: [i % 50, Math.floor(i / 50), 1, 1] as const },
      })),
    };
    const few = { ...many, annotations: many.annotations.slice(0, 40) };
    for (const [dataset, options] of [
      [many, {}],
      [few, {}],
      [few, { palette: true }],
    ] as const) {
      const files = new Map(
        [...writeMaskPng(toSource(dataset), options)].map((file) => [file.path, file.bytes]),
      );
      const back = readMaskPng(JSON.parse(text(files.get(INSTANCES_FILE)!)), (name) => files.get(name)!);
      expect(back.annotations).toHaveLength(dataset.annotations.length);
      const boxes = back.annotations.map(
        ({ shape }) => shape.kind === "mask" && shape.rle.counts.slice(0, 2),
      );
      expect(boxes).toEqual(
        dataset.annotations.map(({ shape }) => shape.kind === "box" && [shape.box[0] * 40 + shape.box[1], 1]),
      );
    }
  });

  it("are read the same by an independent library", async () => {
    const values = Uint16Array.from({ length: 12 * 7 }, (_, i) => (i * 37) % 251);
    const image = { width: 12, height: 7, values };
    const grey = await sharp(encodePng(image, "grey8")).extractChannel(0).raw().toBuffer();
    expect([...grey]).toEqual([...values]);
    const deep = await sharp(encodePng({ ...image, values: values.map((v) => v * 261) }, "grey16"))
      .raw({ depth: "ushort" })
      .toColourspace("grey16")
      .toBuffer();
    expect([...new Uint16Array(deep.buffer, deep.byteOffset, deep.length / 2)]).toEqual([
      ...values.map((v) => v * 261),
    ]);
    const { data, info } = await sharp(encodePng(image, "palette"))
      .removeAlpha()
      .raw()
      .toBuffer({ resolveWithObject: true });
    expect(info.channels).toBe(3);
    expect([...data.subarray(0, 9)]).toEqual([0, 37, 74].flatMap((v) => [...paletteColour(v)]));
  });

  it("written by an independent library are read the same", async () => {
    const raw = Uint8Array.from({ length: 30 * 20 }, (_, i) => (i * 7) % 256);
    const bytes = await sharp(raw, { raw: { width: 30, height: 20, channels: 1 } })
      .toColourspace("b-w")
      .png({ adaptiveFiltering: true })
      .toBuffer();
    expect([...decodePng(bytes).values]).toEqual([...raw]);
  });

  it("refuse colours, damage and foreign files", async () => {
    const colours = await sharp({ create: { width: 2, height: 2, channels: 3, background: "red" } })
      .png()
      .toBuffer();
    expect(() => decodePng(colours)).toThrow(/colours/);
    const good = encodePng({ width: 2, height: 2, values: new Uint16Array(4) }, "grey8");
    expect(() => decodePng(good.slice(0, 40))).toThrow(/ends too early/);
    const damaged = Uint8Array.from(good);
    damaged[20]! ^= 1;
    expect(() => decodePng(damaged)).toThrow(/damaged/);
    expect(() => decodePng(new Uint8Array(20))).toThrow(/not a PNG/);
  });
});

describe("CSV", () => {
  it("quotes by RFC 4180 and defuses formulas", () => {
    const risky: Dataset = { ...full, classes: [{ id: 2, name: "=1+1" }, full.classes[1]!] };
    const lines = [...writeCsv(toSource(risky))].join("").split("\r\n");
    expect(lines).toHaveLength(full.annotations.length + 2);
    expect(lines[1]).toContain(",'=1+1,");
    expect([...writeCsv(toSource(full))].join("")).toContain('"bottle, ""green"""');
  });
});

describe("packing", () => {
  const payload: OutputFile[] = [
    { path: "labels/b%.txt", bytes: new TextEncoder().encode("two\n") },
    { path: "labels/a.txt", bytes: new TextEncoder().encode("one\n") },
  ];

  it("makes a bag whose manifests hold, in one order whatever the input's", () => {
    const bag = new Map(
      bagOf(payload, { "Source-Organization": "Skerrow Bay\nShore Trust" }).map((file) => [
        file.path,
        file.bytes,
      ]),
    );
    expect([...bag.keys()]).toEqual([
      "bagit.txt",
      "bag-info.txt",
      "manifest-sha256.txt",
      "tagmanifest-sha256.txt",
      "data/labels/a.txt",
      "data/labels/b%.txt",
    ]);
    expect(text(bag.get("bagit.txt")!)).toBe("BagIt-Version: 1.0\nTag-File-Character-Encoding: UTF-8\n");
    expect(text(bag.get("bag-info.txt")!)).toBe(
      "Source-Organization: Skerrow Bay Shore Trust\nPayload-Oxum: 8.2\n",
    );
    for (const name of ["manifest-sha256.txt", "tagmanifest-sha256.txt"]) {
      for (const line of text(bag.get(name)!).trim().split("\n")) {
        const [sum, file] = line.split("  ");
        expect(sha256Of(bag.get(file!.replaceAll("%25", "%"))!)).toBe(sum);
      }
    }
    expect(bagOf(payload.toReversed(), {})).toEqual(bagOf(payload, {}));
  });

  it("refuses paths that leave the bag", () => {
    for (const bad of ["../x", "/x", "a//b", "a/./b"]) {
      expect(() => bagTagFiles([{ path: bad, sha256: "", sizeBytes: 0 }], {})).toThrow(/relative path/);
    }
  });

  it("zips to the same bytes each time, readable by another library", async () => {
    const first = await zipBytes(payload);
    expect(Buffer.compare(await zipBytes(payload), first)).toBe(0);
    const names = await new Promise<string[]>((resolve, reject) => {
      yauzl.fromBuffer(Buffer.from(first), (error, zip) => {
        if (error) return reject(error);
        const found: string[] = [];
        zip.on("entry", (entry: { fileName: string }) => found.push(entry.fileName));
        zip.on("end", () => resolve(found));
      });
    });
    expect(names).toEqual(["labels/b%.txt", "labels/a.txt"]);
  });

  it("describes a release in Croissant with every file's checksum", () => {
    const metadata = JSON.parse(
      croissantText({
        name: "wrack-line",
        description: "Litter along a wrack line",
        license: "https://creativecommons.org/licenses/by/4.0/",
        url: "https://example.org/wrack-line",
        version: "1.0.0",
        datePublished: "2026-09-01",
        creators: ["Skerrow Bay Shore Trust"],
        classes: full.classes,
        files: [{ path: "labels.json", sha256: "00", sizeBytes: 5, encodingFormat: "application/json" }],
        cocoPath: "labels.json",
      }),
    ) as Record<string, unknown>;
    expect(metadata).toMatchObject({
      "@type": "sc:Dataset",
      conformsTo: "http://mlcommons.org/croissant/1.1",
      distribution: [{ "@type": "cr:FileObject", "@id": "labels.json", sha256: "00" }],
      recordSet: [{ name: "images" }, { name: "categories" }, { name: "annotations" }],
    });
  });
});

it("file names from elsewhere stay inside the folder and apart from each other", () => {
  expect(safePath("../../etc/passwd")).toBe("etc/passwd");
  expect(safePath("C:\\x\\y.jpg")).toBe("C_/x/y.jpg");
  expect(safePath("..")).toBe("unnamed");
  expect(withExtension("a.b/c", "xml")).toBe("a.b/c.xml");
  const unique = uniquePaths();
  expect([unique("a.png"), unique("A.png"), unique("a.png")]).toEqual(["a.png", "A-2.png", "a-3.png"]);
});

it("a published string is read as its reference reads it", () => {
  expect(rleFromString("1", 1, 1).counts).toEqual([1]);
  expect(readFileSync(EXAMPLE, "utf8")).toContain("invented");
});
