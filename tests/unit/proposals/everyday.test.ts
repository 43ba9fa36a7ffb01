import { existsSync } from "node:fs";
import path from "node:path";
import { describe, expect, it } from "vitest";
import { PHOTOGRAPHS, readCoco } from "@/lib/cli/photographs";
import { boxIou } from "@/lib/geometry/box";
import { everydayProbability } from "@/lib/proposals/everyday";
import { everydayDetector } from "@/lib/proposals/everydayFiles";
import { EVERYDAY_LABELS, suggestLabel, type EverydayLabel } from "@/lib/proposals/everydayLabels";
import { propose } from "@/lib/proposals/propose";
import { decodeFile } from "@/lib/vision/decode";
import type { Raster } from "@/lib/vision/raster";

const isHere = existsSync(PHOTOGRAPHS);
if (!isHere) console.log("skipped: the photographs (../shared/data/coco-by) are not beside the project");

describe("the label that a class probably means", () => {
  it("is found by name, plural and other common names, and is none for what the detector does not know", () => {
    expect(suggestLabel(" Bottles ")).toBe("bottle");
    expect(suggestLabel("Traffic_Lights")).toBe("traffic light");
    expect(suggestLabel("buses")).toBe("bus");
    expect(suggestLabel("Sofa")).toBe("couch");
    expect(suggestLabel("knife")).toBe("knife");
    for (const name of ["rope", "net float", "", "constructor", "cellular"])
      expect(suggestLabel(name)).toBeUndefined();
  });
});

describe("the detector of everyday things", () => {
  it("finds nothing in blank and tiny pictures, and survives odd shapes", async () => {
    const detector = await everydayDetector();
    for (const [width, height] of [
      [4, 4],
      [900, 3],
    ] as const) {
      const flat: Raster = { width, height, data: new Uint8Array(width * height * 3).fill(120) };
      expect(detector.find(flat).filter(({ score }) => score > 0.4)).toEqual([]);
    }
  });

  it("states a probability that rises with the score", () => {
    const stated = [0.06, 0.3, 0.5, 0.8].map((score) => everydayProbability(score));
    expect([...stated].sort((a, b) => a - b)).toEqual(stated);
    expect(everydayProbability(1)).toBeLessThanOrEqual(1);
  });

  it.skipIf(!isHere)(
    "meets six of ten annotated persons and cars of unseen photographs among few hits, as the same class, the same each time",
    async () => {
      const detector = await everydayDetector();
      const coco = readCoco(PHOTOGRAPHS);
      const wanted = new Map(
        coco.categories
          .filter(({ name }) => name === "person" || name === "car")
          .map(({ id, name }) => [id, name as EverydayLabel]),
      );
      let [all, met] = [0, 0];
      const chosen = coco.images.filter(
        ({ coco_url, id }) =>
          coco_url.includes("val2017") &&
          coco.annotations.some((a) => a.image_id === id && wanted.has(a.category_id) && a.area > 1024),
      );
      for (const { id, file_name } of chosen.slice(0, 3)) {
        const { raster } = await decodeFile(path.join(PHOTOGRAPHS, "images", file_name));
        const hits = detector.find(raster, new Set(wanted.values()));
        if (all === 0) expect(detector.find(raster, new Set(wanted.values()))).toEqual(hits);
        for (const { bbox, category_id, area, iscrowd, image_id } of coco.annotations) {
          const label = wanted.get(category_id);
          if (image_id !== id || !label || area <= 1024 || iscrowd) continue;
          all++;
          if (hits.slice(0, 20).some((hit) => hit.label === label && boxIou(hit.box, bbox) >= 0.5)) met++;
        }
      }
      expect(all).toBeGreaterThan(3);
      expect(met / all).toBeGreaterThanOrEqual(0.6);
    },
    90_000,
  );

  it.skipIf(!isHere)(
    "gives proposals the class that a label stands for, outlines, and px of the original",
    async () => {
      const coco = readCoco(PHOTOGRAPHS);
      const image = coco.images.find(({ coco_url }) => coco_url.includes("val2017"));
      const { raster } = await decodeFile(path.join(PHOTOGRAPHS, "images", image?.file_name ?? ""));
      const everyday = {
        detector: await everydayDetector(),
        classOf: new Map(EVERYDAY_LABELS.map((label) => [label, `class of ${label}`])),
        isAll: true,
      };
      const found = propose(raster, { limit: 20, everyday, scale: 0.5 });
      const own = found.filter(({ source }) => source === "detector");
      expect(own.length).toBeGreaterThan(0);
      for (const { classId, rings, box } of own) {
        expect(classId).toMatch(/^class of /);
        expect(rings.length).toBeGreaterThan(0);
        expect(box[0] + box[2]).toBeLessThanOrEqual(raster.width * 2 + 1e-6);
      }
    },
  );
});
