import { mkdtemp, rm } from "node:fs/promises";
import { tmpdir } from "node:os";
import path from "node:path";
import sharp from "sharp";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { annotate, encodeJpeg, renderScene, sceneTruth, type Care, type Scene } from "@/db/seed/scenes";
import { cachedScene } from "@/db/seed/scenes/cache";
import { closedOutline } from "@/db/seed/scenes/closing";
import { instancesOf } from "@/db/seed/scenes/truth";
import { maskArea, maskBounds, maskIntersectionArea, rasteriseRings } from "@/lib/geometry/mask";
import { maskFromRle, rleArea, rleFromString } from "@/lib/geometry/rle";
import { ringsIou } from "@/lib/geometry/region";

const SMALL = { width: 480, height: 360 };
let shore: Scene;
let trays: Scene;

beforeAll(() => {
  shore = renderScene({ batch: "wrack-line", seed: 101, ...SMALL });
  trays = renderScene({ batch: "glasshouse", seed: 301, ...SMALL });
});

describe("a rendered scene", () => {
  it("is the same for the same seed, to the byte, and another for another seed", () => {
    const again = renderScene({ batch: "wrack-line", seed: 101, ...SMALL });
    expect(Buffer.compare(Buffer.from(again.raster.data), Buffer.from(shore.raster.data))).toBe(0);
    expect(again.instances).toEqual(shore.instances);
    const other = renderScene({ batch: "wrack-line", seed: 102, ...SMALL });
    expect(Buffer.compare(Buffer.from(other.raster.data), Buffer.from(shore.raster.data))).not.toBe(0);
  });

  it("holds objects of the classes of its batch only", () => {
    expect(shore.instances.length).toBeGreaterThan(3);
    for (const { className } of shore.instances)
      expect(["bottle", "cap", "rope", "float", "can"]).toContain(className);
    expect(new Set(trays.instances.map(({ className }) => className))).toEqual(
      new Set(["empty cell", "seedling"]),
    );
  });

  it("gives each pixel to one object at most, and boxes that fit to the pixel", () => {
    for (const { instances, width, height } of [shore, trays]) {
      const masks = instances.map(({ rings }) => rasteriseRings(rings, width, height));
      for (const [i, mask] of masks.entries()) {
        expect(maskBounds(mask)).toEqual(instances[i]?.box);
        for (const other of masks.slice(i + 1)) expect(maskIntersectionArea(mask, other)).toBe(0);
      }
    }
  });

  it("uses the light range of a photograph", async () => {
    for (const { raster } of [shore, trays]) {
      const { channels } = await sharp(raster.data, {
        raw: { width: raster.width, height: raster.height, channels: 3 },
      }).stats();
      for (const { mean, stdev } of channels) {
        expect(mean).toBeGreaterThan(25);
        expect(mean).toBeLessThan(215);
        expect(stdev).toBeGreaterThan(12);
      }
    }
  });

  it("labels what a variant asks for instead", () => {
    const { instances } = renderScene({
      batch: "wrack-line",
      seed: 7,
      ...SMALL,
      variant: { ground: "dark", classes: ["shell", "driftwood", "kelp"] },
    });
    for (const { className } of instances) expect(["shell", "driftwood", "kelp"]).toContain(className);
  });
});

describe("the truth of a picture", () => {
  // Object 1 is a frame of 24 px with a hole and loses a corner to object 2; 3 is too small to be asked for.
  const [width, height] = [40, 30];
  const owner = new Int16Array(width * height);
  const fill = (x0: number, y0: number, x1: number, y1: number, number: number) => {
    for (let y = y0; y < y1; y++) for (let x = x0; x < x1; x++) owner[y * width + x] = number;
  };
  fill(2, 3, 26, 27, 1);
  fill(8, 9, 20, 21, 0);
  fill(22, 23, 36, 30, 2);
  fill(37, 0, 40, 3, 3);
  const classNames = ["", "rope", "can", "cap"];
  const fullPx = [0, 24 * 24 - 12 * 12, 98, 9];
  const instances = instancesOf({ owner, fullPx, width, height, classNames });

  it("is the visible pixels, with holes, and what share of the object they are", () => {
    expect(instances.map(({ className }) => className)).toEqual(["rope", "can"]);
    expect(instances[0]?.box).toEqual([2, 3, 24, 24]);
    expect(instances[0]?.rings.length).toBe(2);
    expect(instances[0]?.visibleFraction).toBeCloseTo((24 * 24 - 144 - 16) / (24 * 24 - 144), 12);
    expect(instances[0]?.occluded).toBe(false);
    expect(instances[1]?.visibleFraction).toBe(1);
  });

  it("is written to COCO with the same pixels", () => {
    const text = sceneTruth([{ fileName: "a.jpg", scene: { width, height, instances } }]);
    const coco = JSON.parse(text);
    expect(coco.categories).toEqual([
      { id: 1, name: "can" },
      { id: 2, name: "rope" },
    ]);
    const [rope] = coco.annotations;
    const rle = rleFromString(rope.segmentation.counts, width, height);
    expect(rope).toMatchObject({ image_id: 1, category_id: 2, bbox: [2, 3, 24, 24], area: 416, iscrowd: 0 });
    expect(rleArea(rle)).toBe(416);
    const mask = maskFromRle(rle);
    expect(maskIntersectionArea(mask, rasteriseRings(instances[0]?.rings ?? [], width, height))).toBe(416);
  });
});

describe("a scene's file", () => {
  it("shows the same picture upright whatever the orientation tag", async () => {
    const upright = await sharp(await encodeJpeg(shore, { quality: 95 }))
      .raw()
      .toBuffer();
    for (const exifOrientation of [2, 3, 6, 7, 8] as const) {
      const file = await encodeJpeg(shore, { quality: 95, exifOrientation });
      expect((await sharp(file).metadata()).orientation).toBe(exifOrientation);
      const { data, info } = await sharp(file).autoOrient().raw().toBuffer({ resolveWithObject: true });
      expect([info.width, info.height]).toEqual([shore.width, shore.height]);
      let difference = 0;
      for (let i = 0; i < data.length; i++) difference += Math.abs((data[i] ?? 0) - (upright[i] ?? 0));
      expect(difference / data.length).toBeLessThan(3);
    }
  });

  it("is kept with its truth, and read back the same", async () => {
    const folder = await mkdtemp(path.join(tmpdir(), "scenes-"));
    afterAll(() => rm(folder, { recursive: true }));
    const options = { batch: "glasshouse", seed: 5, width: 160, height: 120 } as const;
    const first = await cachedScene(options, folder);
    const second = await cachedScene(options, folder);
    expect(Buffer.compare(first.jpeg, second.jpeg)).toBe(0);
    expect(second.truth).toEqual(first.truth);
  });
});

describe("a played annotator", () => {
  const square = (x: number, y: number, size: number, className: string) => ({
    className,
    box: [x, y, size, size] as const,
    rings: [
      [
        [x, y],
        [x + size, y],
        [x + size, y + size * 0.7],
        [x + size * 0.6, y + size],
        [x, y + size],
      ],
    ] as const,
    visibleFraction: 1,
    occluded: false,
  });
  const truth = {
    width: 1280,
    height: 960,
    instances: Array.from({ length: 24 }, (_, i) =>
      square(40 + (i % 6) * 200, 40 + Math.floor(i / 6) * 220, 90, i % 2 ? "can" : "float"),
    ),
  };
  /** Share of the truth found with its class, and the mean IoU of what was found, over twenty drawings. */
  const scoreOf = (care: Care) => {
    let [found, iou, drawn] = [0, 0, 0];
    for (let seed = 0; seed < 20; seed++) {
      const labels = annotate(truth, care, seed);
      drawn += labels.length;
      for (const object of truth.instances) {
        const best = Math.max(
          0,
          ...labels
            .filter((label) => label.className === object.className)
            .map((label) => ringsIou(label.rings, object.rings)),
        );
        if (best < 0.5) continue;
        found += 1;
        iou += best;
      }
    }
    return { found: found / (20 * 24), iou: iou / found, drawn: drawn / 20 };
  };

  it("draws the same for the same seed", () => {
    expect(annotate(truth, "hasty", 3)).toEqual(annotate(truth, "hasty", 3));
    expect(annotate(truth, "hasty", 3)).not.toEqual(annotate(truth, "hasty", 4));
  });

  it("finds more and follows edges closer the more care there is", () => {
    const [careful, steady, hasty, careless] = (["careful", "steady", "hasty", "careless"] as const).map(
      scoreOf,
    );
    if (!careful || !steady || !hasty || !careless) throw new Error("four people were asked");
    expect(careful.iou).toBeGreaterThan(0.94);
    expect(careful.found).toBeGreaterThan(0.95);
    expect(careful.iou).toBeGreaterThan(steady.iou);
    expect(steady.iou).toBeGreaterThan(hasty.iou);
    expect(hasty.iou).toBeGreaterThan(careless.iou);
    expect(steady.found).toBeGreaterThan(hasty.found);
    expect(hasty.found).toBeGreaterThan(careless.found);
    expect(careless.found).toBeGreaterThan(0.4);
  });

  it("draws boxes for outlines where that is the habit", () => {
    const labels = Array.from({ length: 10 }, (_, seed) => annotate(truth, "boxy", seed)).flat();
    const boxes = labels.filter(({ rings }) => rings.length === 1 && rings[0]?.length === 4);
    expect(boxes.length / labels.length).toBeGreaterThan(0.7);
  });

  it("stays inside the picture", () => {
    for (const { rings } of annotate(shore, "careless", 9)) {
      for (const [x, y] of rings.flat()) {
        expect(x).toBeGreaterThanOrEqual(0);
        expect(y).toBeGreaterThanOrEqual(0);
        expect(x).toBeLessThanOrEqual(shore.width);
        expect(y).toBeLessThanOrEqual(shore.height);
      }
    }
  });

  it("draws across a blade that splits an object, and not across a wide gap", () => {
    const bar = (x: number) =>
      [
        [x, 20],
        [x + 30, 20],
        [x + 30, 40],
        [x, 40],
      ] as const;
    const size = { width: 200, height: 100 };
    const joined = closedOutline([bar(20), bar(53)], 4, size);
    expect(joined.length).toBe(1);
    expect(maskArea(rasteriseRings(joined, 200, 100))).toBe(63 * 20);
    expect(closedOutline([bar(20), bar(70)], 4, size).length).toBe(2);
  });
});
