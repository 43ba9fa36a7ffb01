import { describe, expect, it } from "vitest";
import { boxIou, boxOfRings, ringOfBox } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";
import { trainExemplars } from "@/lib/proposals/exemplar";
import { propose } from "@/lib/proposals/propose";
import { tilesOf } from "@/lib/proposals/tiles";
import type { Raster } from "@/lib/vision/raster";
import { seeded } from "@/lib/vision/ranker";
import { paint } from "@/tests/support/pictures";

/** Red and blue blocks on sand, none near another. */
function blocks(
  width: number,
  height: number,
  count: number,
  seed: number,
): { raster: Raster; objects: { classId: string; box: Box }[] } {
  const random = seeded(seed);
  const objects: { classId: string; box: Box }[] = [];
  for (let tries = 0; objects.length < count && tries < 500; tries++) {
    const isRed = objects.length % 2 === 0;
    const w = isRed ? 40 + Math.floor(random() * 8) : 26;
    const h = isRed ? 30 : 44 + Math.floor(random() * 8);
    const box: Box = [
      Math.floor(10 + random() * (width - w - 20)),
      Math.floor(10 + random() * (height - h - 20)),
      w,
      h,
    ];
    const free = objects.every(
      ({ box: [x, y, ow, oh] }) =>
        box[0] > x + ow + 15 || box[0] + w + 15 < x || box[1] > y + oh + 15 || box[1] + h + 15 < y,
    );
    if (free) objects.push({ classId: isRed ? "red" : "blue", box });
  }
  const shapes = objects.map(({ classId, box }) => ({
    rings: [ringOfBox(box)],
    colour: classId === "red" ? ([190, 60, 50] as const) : ([60, 80, 170] as const),
  }));
  return { raster: paint(width, height, shapes, [205, 190, 150], random, 5), objects };
}

const flat = (width: number, height: number): Raster => ({
  width,
  height,
  data: new Uint8Array(width * height * 3).fill(90),
});

describe("propose", () => {
  const { raster, objects } = blocks(320, 240, 6, 2);

  it("finds every object that stands out, best first, with an outline inside its box", () => {
    const found = propose(raster, { limit: 30 });
    for (const { box } of objects)
      expect(Math.max(...found.map((proposal) => boxIou(proposal.box, box)))).toBeGreaterThan(0.6);
    found.forEach(({ score, box, rings, classId }, n) => {
      if (n > 0) expect(score).toBeLessThanOrEqual(found[n - 1]!.score);
      expect(score).toBeGreaterThanOrEqual(0);
      expect(score).toBeLessThanOrEqual(1);
      expect(classId).toBeNull();
      const [x, y, w, h] = boxOfRings(rings);
      expect(x).toBeGreaterThanOrEqual(box[0] - 1e-6);
      expect(y).toBeGreaterThanOrEqual(box[1] - 1e-6);
      expect(x + w).toBeLessThanOrEqual(box[0] + box[2] + 1e-6);
      expect(y + h).toBeLessThanOrEqual(box[1] + box[3] + 1e-6);
    });
  });

  it("is the same each time, and a shorter list is the beginning of a longer one", () => {
    const long = propose(raster, { limit: 40 });
    expect(propose(raster, { limit: 10 })).toEqual(long.slice(0, 10));
  });

  it("answers in px of the original when the raster was shrunk", () => {
    const plain = propose(raster, { limit: 5 });
    const shrunk = propose(raster, { limit: 5, scale: 0.25 });
    shrunk.forEach(({ box }, n) =>
      box.forEach((value, axis) => expect(value).toBeCloseTo(plain[n]!.box[axis]! * 4, 6)),
    );
  });

  it("has nothing to say about blank and tiny pictures, and survives odd ones", () => {
    for (const [w, h] of [
      [1, 1],
      [3, 3],
      [64, 64],
      [1, 2000],
      [2000, 1],
      [5, 900],
      [900, 5],
    ] as const) {
      expect(propose(flat(w, h))).toEqual([]);
    }
    const random = seeded(9);
    const noise: Raster = {
      width: 300,
      height: 200,
      data: Uint8Array.from({ length: 180_000 }, () => random() * 256),
    };
    expect(propose(noise, { limit: 20 }).length).toBeLessThanOrEqual(20);
    expect(propose({ ...noise, width: 3000, height: 20 }, { limit: 5 }).length).toBeLessThanOrEqual(5);
  });

  it("finds small objects in a large picture through tiles", () => {
    const large = blocks(1000, 420, 6, 5);
    const found = propose(large.raster, { limit: 100 });
    const met = large.objects.filter(({ box }) => found.some((proposal) => boxIou(proposal.box, box) > 0.6));
    expect(met.length).toBeGreaterThanOrEqual(6);
  });
});

describe("tilesOf", () => {
  it("covers a large picture with overlap and bounds the number of tiles", () => {
    for (const [w, h] of [
      [1280, 960],
      [8660, 5773],
      [20_000, 300],
      [700, 500],
    ] as const) {
      const [whole, ...tiles] = tilesOf(w, h);
      expect(whole).toMatchObject({ left: 0, top: 0, width: w, height: h });
      expect(tiles.length).toBeLessThanOrEqual(40);
      for (const { left, top, width, height } of tiles) {
        expect(left).toBeGreaterThanOrEqual(0);
        expect(top).toBeGreaterThanOrEqual(0);
        expect(left + width).toBeLessThanOrEqual(w);
        expect(top + height).toBeLessThanOrEqual(h);
      }
      if (tiles.length > 0) {
        const seen = (x: number, y: number) =>
          tiles.some(
            (tile) =>
              x >= tile.left && x < tile.left + tile.width && y >= tile.top && y < tile.top + tile.height,
          );
        for (let n = 0; n <= 20; n++)
          for (let m = 0; m <= 20; m++) expect(seen(((w - 1) * n) / 20, ((h - 1) * m) / 20)).toBe(true);
      }
    }
  });
});

describe("trainExemplars", () => {
  const images = [1, 2, 3].map((seed) => {
    const { raster, objects } = blocks(240, 180, 6, seed + 20);
    return { raster, instances: objects };
  });

  it("learns classes from a few settled images, says by how much it gains, and names what it finds", () => {
    const model = trainExemplars(images, { foldsMax: 2 });
    expect(model.useful).toBe(true);
    expect(model.apWith).toBeGreaterThan(model.apWithout ?? 1);
    const back = JSON.parse(JSON.stringify(model)) as typeof model;
    expect(back).toEqual(model);
    const { raster, objects } = blocks(240, 180, 6, 77);
    const found = propose(raster, { limit: 16, model: back });
    for (const { classId, box } of objects) {
      const hit = found.find((proposal) => proposal.classId === classId && boxIou(proposal.box, box) > 0.5);
      expect(hit?.source).toBe("exemplar");
    }
  });

  it("stays off where nothing can be learned or measured", () => {
    const random = seeded(4);
    const anywhere = [1, 2, 3].map((seed) => ({
      raster: blocks(200, 160, 3, seed + 50).raster,
      instances: Array.from({ length: 3 }, () => ({
        classId: "none",
        box: [random() * 150, random() * 110, 20 + random() * 30, 20 + random() * 30] as Box,
      })),
    }));
    expect(trainExemplars(anywhere, { foldsMax: 2 }).useful).toBe(false);
    expect(trainExemplars([]).useful).toBe(false);
    expect(
      trainExemplars([{ raster: images[0]!.raster, instances: images[0]!.instances.slice(0, 2) }]),
    ).toMatchObject({ useful: false, apWith: null });
  });
});
