import { describe, expect, it } from "vitest";
import { boxFromPoints, boxIntersection, boxIou, boxOfRings, boxUnion, ringOfBox } from "@/lib/geometry/box";
import { cutHole, mergeRegions, splitRings } from "@/lib/geometry/clip";
import { shapeArea, shapeIou } from "@/lib/geometry/iou";
import { maskArea, rasteriseRings } from "@/lib/geometry/mask";
import { partsOfRings } from "@/lib/geometry/nest";
import { boxToUpright } from "@/lib/geometry/orientation";
import { ringsArea, ringsIntersectionArea, ringsIou } from "@/lib/geometry/region";
import { pointInRings, ringCentroid, signedRingArea } from "@/lib/geometry/ring";
import { checkRle, mergeRle, RleError, rleFromString } from "@/lib/geometry/rle";
import { snapRing } from "@/lib/geometry/snap";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Ring, Rings, Shape } from "@/lib/geometry/types";
import { validateShape } from "@/lib/geometry/validate";

const square = (x: number, y: number, size: number): Ring => ringOfBox([x, y, size, size]);
const moved = (rings: Rings, dx: number, dy: number): Rings =>
  rings.map((ring) => ring.map(([x, y]) => [x + dx, y + dy] as const));

describe("areas have a stated answer", () => {
  it("for touching shapes: nothing in common", () => {
    expect(ringsIou([square(0, 0, 10)], [square(10, 0, 10)])).toBe(0);
    expect(ringsIou([square(0, 0, 10)], [square(10, 10, 10)])).toBe(0);
    expect(boxIou([0, 0, 10, 10], [10, 0, 10, 10])).toBe(0);
    expect(boxIntersection([0, 0, 10, 10], [10, 0, 10, 10])).toBeUndefined();
  });

  it("for empty and flat shapes: no area and no IoU, not even with themselves", () => {
    const flat: Ring = [
      [0, 0],
      [5, 5],
      [10, 10],
    ];
    for (const rings of [[], [[]], [flat], [[[3, 3]]], [flat, flat]] as Rings[]) {
      expect(ringsArea(rings)).toBe(0);
      expect(ringsIou(rings, rings)).toBe(0);
      expect(ringsIou(rings, [square(0, 0, 10)])).toBe(0);
    }
    expect(boxIou([1, 1, 0, 5], [1, 1, 0, 5])).toBe(0);
    expect(boxOfRings([])).toEqual([0, 0, 0, 0]);
    expect(boxFromPoints([])).toEqual([0, 0, 0, 0]);
  });

  it("for nested rings: a ring inside another is a hole", () => {
    const ringed: Rings = [square(0, 0, 10), square(2, 2, 6)];
    expect(ringsArea(ringed)).toBe(64);
    expect(ringsIou(ringed, [square(2, 2, 6)])).toBe(0);
    expect(ringsIou(ringed, [square(0, 0, 10)])).toBe(0.64);
    expect(pointInRings([5, 5], ringed)).toBe(false);
  });

  it("for a ring that crosses itself: each point counts once or not at all", () => {
    const bowTie: Ring = [
      [0, 0],
      [10, 10],
      [10, 0],
      [0, 10],
    ];
    expect(signedRingArea(bowTie)).toBe(0);
    expect(ringsArea([bowTie])).toBe(50);
    // Twice round the same square covers every point twice, which is an even number of times.
    expect(ringsArea([[...square(0, 0, 10), ...square(0, 0, 10)]])).toBe(0);
  });

  it("far from the origin: the same IoU as near it", () => {
    const a: Rings = [square(0, 0, 10)];
    const b: Rings = [square(3, 4, 10)];
    const near = ringsIou(a, b);
    expect(ringsIou(moved(a, 1e9, -1e9), moved(b, 1e9, -1e9))).toBe(near);
  });

  it("for huge input: 20,000 vertices take well under a second", () => {
    const wheel = (turn: number): Ring =>
      Array.from({ length: 20_000 }, (_, i) => {
        const angle = (2 * Math.PI * (i + turn)) / 20_000;
        return [5000 + 4000 * Math.cos(angle), 5000 + 4000 * Math.sin(angle)] as const;
      });
    expect(ringsIou([wheel(0)], [wheel(0.5)])).toBeGreaterThan(0.9999);
    expect(ringsArea([wheel(0)]) / (Math.PI * 4000 ** 2)).toBeCloseTo(1, 6);
  });

  it("for a box against a polygon of the same outline: 1", () => {
    const box: Shape = { kind: "box", box: [1.5, 2.5, 7, 3] };
    const polygon: Shape = { kind: "polygon", rings: [ringOfBox([1.5, 2.5, 7, 3])] };
    expect(shapeIou(box, polygon)).toBe(1);
    expect(shapeIou(polygon, box)).toBe(1);
    expect(shapeArea(box)).toBe(21);
    expect(shapeArea(polygon)).toBe(21);
  });

  it("for the right edge where left + width rounds below it", () => {
    // 0.1 + (0.3 - 0.1) is less than 0.3 in binary: the edge at 0.3 must still bound the common part.
    const a: Rings = [ringOfBox([0.1, 0.1, 0.3 - 0.1, 0.3 - 0.1])];
    const thin: Rings = [
      [
        [0.1, 0.1],
        [0.3, 0.1],
        [0.3, 0.3],
        [0.1, 0.3],
      ],
    ];
    expect(ringsIou(a, thin)).toBeCloseTo(1, 12);
    expect(ringsIntersectionArea(thin, [square(-1, -1, 10)])).toBeCloseTo(0.04, 12);
  });

  it("for the centre of a ring without area: the centre of its outline", () => {
    expect(ringCentroid([])).toBeUndefined();
    expect(ringCentroid([[4, 5]])).toEqual([4, 5]);
    expect(
      ringCentroid([
        [0, 0],
        [10, 0],
        [0, 0],
      ]),
    ).toEqual([5, 0]);
  });
});

describe("neighbouring shapes", () => {
  it("share no pixel and leave none out along a common edge", () => {
    const cut = 7.3;
    const left = rasteriseRings([ringOfBox([0, 0, cut, 20])], 20, 20);
    const right = rasteriseRings([ringOfBox([cut, 0, 20 - cut, 20])], 20, 20);
    expect(maskArea(left) + maskArea(right)).toBe(400);
    // Centres exactly on the edge belong to the right-hand shape.
    expect(maskArea(rasteriseRings([ringOfBox([0, 0, 7.5, 1])], 20, 20))).toBe(7);
    expect(maskArea(rasteriseRings([ringOfBox([7.5, 0, 2, 1])], 20, 20))).toBe(2);
  });

  it("snap to one border without gap or overlap", () => {
    const neighbour = square(0, 0, 10);
    const drawn: Ring = [
      [10.4, -0.3],
      [20, 0],
      [20, 10],
      [9.7, 10.2],
    ];
    const snapped = snapRing(drawn, [neighbour], 1);
    expect(snapped).toEqual([
      [10, 0],
      [20, 0],
      [20, 10],
      [10, 10],
    ]);
    expect(ringsIntersectionArea([snapped], [neighbour])).toBe(0);
  });

  it("take over the neighbour's corners between two snapped vertices", () => {
    const neighbour: Ring = [
      [0, 0],
      [10, 0],
      [10.5, 5],
      [10, 10],
      [0, 10],
    ];
    const drawn: Ring = [
      [10.2, 0],
      [20, 0],
      [20, 10],
      [10.2, 10],
    ];
    expect(snapRing(drawn, [neighbour], 1)).toContainEqual([10.5, 5]);
  });
});

describe("connectivity", () => {
  // Two pixels that touch at a corner.
  const diagonal = rasteriseRings([square(1, 1, 1), square(2, 2, 1)], 5, 5);

  it("keeps corner neighbours apart when four-connected and joins them when eight-connected", () => {
    expect(traceMask(diagonal, 4)).toEqual([square(1, 1, 1), square(2, 2, 1)]);
    expect(traceMask(diagonal, 8)).toHaveLength(1);
    expect(ringsArea(traceMask(diagonal, 8))).toBe(2);
  });

  it("gives holes their own rings, which run the other way", () => {
    const ringed = rasteriseRings([square(1, 1, 6), square(3, 3, 2)], 10, 10);
    const traced = traceMask(ringed);
    expect(traced).toHaveLength(2);
    expect(traced.map((ring) => Math.sign(signedRingArea(ring)))).toEqual([1, -1]);
    expect(partsOfRings(traced)).toMatchObject([{ holes: [{ length: 4 }] }]);
  });
});

describe("cutting and joining", () => {
  it("splits by a line into what lies left and right of it", () => {
    const halves = splitRings([square(0, 0, 10)], [4, 20], [4, -5]);
    expect(halves && boxOfRings(halves.left)).toEqual([0, 0, 4, 10]);
    expect(halves && boxOfRings(halves.right)).toEqual([4, 0, 6, 10]);
    expect(splitRings([square(0, 0, 10)], [20, 0], [20, 10])).toBeUndefined();
    expect(splitRings([square(0, 0, 10)], [5, 5], [5, 5])).toBeUndefined();
  });

  it("keeps untouched corners to the bit", () => {
    const odd: Ring = [
      [0.123456789, 0.1],
      [10, 0],
      [10, 10],
      [0, 10],
    ];
    const holed = cutHole([odd], square(4, 4, 2));
    expect(holed.flat()).toContainEqual([0.123456789, 0.1]);
    expect(ringsArea(holed)).toBeCloseTo(ringsArea([odd]) - 4, 9);
  });

  it("merges what touches into one ring", () => {
    expect(mergeRegions([[square(0, 0, 5)], [square(5, 0, 5)]])).toHaveLength(1);
    expect(boxUnion([0, 0, 1, 1], [4, 5, 1, 1])).toEqual([0, 0, 5, 6]);
  });
});

describe("validation", () => {
  const limits = { width: 100, height: 80 };
  const polygon = (...rings: Ring[]): Shape => ({ kind: "polygon", rings });

  it("passes a good shape through unchanged", () => {
    const good = polygon(square(10, 10, 20));
    expect(validateShape(good, limits)).toEqual({ ok: true, shape: good, repairs: [] });
    const box: Shape = { kind: "box", box: [0, 0, 100, 80] };
    expect(validateShape(box, limits)).toEqual({ ok: true, shape: box, repairs: [] });
  });

  it.each<[string, Shape, RegExp]>([
    [
      "numbers that are not finite",
      polygon([
        [0, 0],
        [NaN, 1],
        [5, 5],
      ]),
      /not two finite numbers/,
    ],
    [
      "two vertices",
      polygon([
        [0, 0],
        [5, 5],
      ]),
      /fewer than three/,
    ],
    ["no rings", polygon(), /fewer than three/],
    [
      "a line there and back",
      polygon([
        [0, 0],
        [5, 5],
        [9, 9],
        [2, 2],
      ]),
      /no area/,
    ],
    ["a shape beside the image", polygon(square(200, 10, 10)), /outside the image/],
    [
      "a vertex at the other end of the world",
      polygon([
        [0, 0],
        [1e300, 0],
        [5, 5],
      ]),
      /far outside/,
    ],
    ["a box without height", { kind: "box", box: [1, 1, 5, 0] }, /no area/],
    ["a box beside the image", { kind: "box", box: [100, 0, 5, 5] }, /outside the image/],
    ["a box of NaN", { kind: "box", box: [0, 0, NaN, 5] }, /four finite/],
  ])("refuses %s", (_, shape, reason) => {
    const result = validateShape(shape, limits);
    expect(result.ok).toBe(false);
    if (!result.ok) expect(result.reason).toMatch(reason);
  });

  it("refuses more vertices than it is told to read, and less area than counts", () => {
    expect(validateShape(polygon(square(0, 0, 10)), { ...limits, verticesMax: 3 })).toMatchObject({
      ok: false,
    });
    expect(validateShape(polygon(square(0, 0, 1)), { ...limits, areaPx2Min: 4 })).toMatchObject({
      ok: false,
    });
  });

  it.each<[string, Shape, string[], number]>([
    ["cuts off what lies outside", polygon(square(90, 70, 20)), ["clipped"], 100],
    [
      "drops repeated points",
      polygon([
        [0, 0],
        [0, 0],
        [10, 0],
        [10, 10],
        [0, 10],
      ]),
      ["repeated-points"],
      100,
    ],
    [
      "drops spikes",
      polygon([
        [0, 0],
        [10, 0],
        [10, 10],
        [30, 10],
        [0, 10],
      ]),
      ["spikes"],
      100,
    ],
    [
      "rewrites a ring that crosses itself",
      polygon([
        [0, 0],
        [10, 10],
        [10, 0],
        [0, 10],
      ]),
      ["self-crossing"],
      50,
    ],
    [
      "drops a ring without area",
      polygon(square(0, 0, 10), [
        [1, 1],
        [2, 2],
        [3, 3],
      ]),
      ["spikes", "empty-rings"],
      100,
    ],
    ["cuts a box to the image", { kind: "box", box: [-5, -5, 15, 15] }, ["clipped"], 100],
  ])("%s", (_, shape, repairs, areaPx2) => {
    const result = validateShape(shape, limits);
    expect(result).toMatchObject({ ok: true, repairs });
    if (result.ok) expect(shapeArea(result.shape)).toBeCloseTo(areaPx2, 6);
  });
});

describe("run-length codes are refused", () => {
  it.each<[string, () => unknown, RegExp]>([
    [
      "when they cover too few pixels",
      () => checkRle({ width: 4, height: 4, counts: [3, 4] }),
      /cover 7 pixels of 16/,
    ],
    [
      "when a run is negative",
      () => checkRle({ width: 2, height: 2, counts: [5, -1] }),
      /not a whole number/,
    ],
    ["when a character is foreign", () => rleFromString("0é", 4, 4), /character 2/],
    ["when the string ends inside a number", () => rleFromString("o", 4, 4), /ends inside/],
    ["when a number never ends", () => rleFromString("ooooooooo0", 4, 4), /too long/],
    [
      "when sizes differ",
      () =>
        mergeRle(
          [
            { width: 1, height: 1, counts: [1] },
            { width: 2, height: 1, counts: [2] },
          ],
          "union",
        ),
      /do not merge/,
    ],
    ["when there is nothing to merge", () => mergeRle([], "union"), /nothing/],
  ])("%s", (_, run, message) => {
    expect(run).toThrow(RleError);
    expect(run).toThrow(message);
  });
});

it("a box follows its image when that is turned upright", () => {
  const box: Box = [1, 2, 3, 4];
  expect(boxToUpright(box, 20, 10, 6)).toEqual([10 - 2 - 4, 1, 4, 3]);
  expect(boxToUpright(box, 20, 10, 3)).toEqual([20 - 1 - 3, 10 - 2 - 4, 3, 4]);
});
