import { describe, expect, it } from "vitest";
import { maskIou, rasteriseRings } from "@/lib/geometry/mask";
import type { Point, Rings } from "@/lib/geometry/types";
import { outlineInBox } from "@/lib/vision/outline";
import { seeded } from "@/lib/vision/ranker";
import { paint, polygonOf } from "@/tests/support/pictures";

const random = seeded(3);
const star: Rings = [
  Array.from({ length: 10 }, (_, n): Point => {
    const r = n % 2 ? 30 : 55;
    return [100 + r * Math.cos((n / 5) * Math.PI), 80 + r * Math.sin((n / 5) * Math.PI)];
  }),
];
const scene = paint(200, 160, [{ rings: star, colour: [190, 60, 50] }], [170, 165, 140], random);
const box = [45, 27.7, 110, 104.6] as const;

describe("outlineInBox", () => {
  it("finds a shape that stands out better than the box's ellipse does", () => {
    const { rings, confidence } = outlineInBox(scene, box);
    const truth = rasteriseRings(star, 200, 160);
    expect(maskIou(rasteriseRings(rings, 200, 160), truth)).toBeGreaterThan(0.85);
    expect(confidence).toBeGreaterThan(0.6);
    expect(confidence).toBeLessThanOrEqual(1);
  });

  it("stays in the box and is the same each time", () => {
    const first = outlineInBox(scene, box);
    expect(outlineInBox(scene, box)).toEqual(first);
    for (const ring of first.rings)
      for (const [x, y] of ring) {
        expect(x).toBeGreaterThanOrEqual(box[0]);
        expect(x).toBeLessThanOrEqual(box[0] + box[2]);
        expect(y).toBeGreaterThanOrEqual(box[1]);
        expect(y).toBeLessThanOrEqual(box[1] + box[3]);
      }
  });

  it("holds to what is said to be inside and outside", () => {
    const { rings } = outlineInBox(scene, box, { outside: [[100, 80]] });
    const mask = rasteriseRings(rings, 200, 160);
    const without = rasteriseRings(outlineInBox(scene, box).rings, 200, 160);
    expect(maskIou(mask, without)).toBeLessThan(0.999);
  });

  it("takes four extreme points in any order", () => {
    const extremes: Point[] = [
      [155, 80],
      [117, 132],
      [45, 80],
      [117, 28],
    ];
    const one = outlineInBox(scene, box, { extremes });
    expect(outlineInBox(scene, box, { extremes: [...extremes].reverse() })).toEqual(one);
    expect(maskIou(rasteriseRings(one.rings, 200, 160), rasteriseRings(star, 200, 160))).toBeGreaterThan(0.8);
  });

  it("answers every box, also one of nothing, beside the picture or larger than it", () => {
    for (const odd of [
      [10, 10, 0, 0],
      [-50, -50, 20, 20],
      [500, 500, 10, 10],
      [-10, -10, 400, 400],
      [0, 0, 3, 3],
      [199, 159, 1, 1],
    ] as const) {
      const { rings, confidence } = outlineInBox(scene, odd);
      expect(Number.isFinite(confidence)).toBe(true);
      for (const ring of rings) expect(ring.length).toBeGreaterThanOrEqual(3);
    }
    const blank = { width: 60, height: 60, data: new Uint8Array(60 * 60 * 3).fill(128) };
    expect(outlineInBox(blank, [10, 10, 40, 40]).rings.length).toBeGreaterThan(0);
  });

  it("keeps its shape when the picture is moved", () => {
    const wide = paint(
      260,
      200,
      [{ rings: polygonOf(star, 40, 20), colour: [190, 60, 50] }],
      [170, 165, 140],
      seeded(3),
    );
    const moved = outlineInBox(wide, [85, 47.7, 110, 104.6]);
    expect(
      maskIou(rasteriseRings(moved.rings, 260, 200), rasteriseRings(polygonOf(star, 40, 20), 260, 200)),
    ).toBeGreaterThan(0.85);
  });
});
