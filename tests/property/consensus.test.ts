import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { assign } from "@/lib/consensus/assignment";
import { cluster } from "@/lib/consensus/cluster";
import { ringArea, simplify } from "@/lib/consensus/contour";
import { heatMap } from "@/lib/consensus/heatMap";
import { mergeImage } from "@/lib/consensus/mergeImage";
import { prepareImage } from "@/lib/consensus/prepare";
import { estimateReliability, ReliabilityBatch } from "@/lib/consensus/reliability";
import { drawnIou, overlapOf, regionIou, spansOf } from "@/lib/consensus/spans";
import { CONSENSUS_METHODS, type ImageLabels, type LabelledInstance } from "@/lib/consensus/types";
import type { Point, Ring, Shape } from "@/lib/geometry/types";

const SIZE = 200;

/** A star-shaped ring of 5 to 9 corners inside the image. */
const ring = (): fc.Arbitrary<Ring> =>
  fc
    .record({
      x: fc.integer({ min: 50, max: 150 }),
      y: fc.integer({ min: 50, max: 150 }),
      radii: fc.array(fc.integer({ min: 8, max: 45 }), { minLength: 5, maxLength: 9 }),
    })
    .map(({ x, y, radii }) =>
      radii.map((radius, k): Point => {
        const angle = (2 * Math.PI * k) / radii.length + 0.1;
        return [x + radius * Math.cos(angle), y + radius * Math.sin(angle)];
      }),
    );

const shape = (): fc.Arbitrary<Shape> =>
  fc.oneof(
    { weight: 3, arbitrary: ring().map((one): Shape => ({ kind: "polygon", rings: [one] })) },
    {
      weight: 1,
      arbitrary: fc
        .tuple(
          fc.integer({ min: 0, max: 120 }),
          fc.integer({ min: 0, max: 120 }),
          fc.integer({ min: 5, max: 70 }),
          fc.integer({ min: 5, max: 70 }),
        )
        .map(([x, y, width, height]): Shape => ({ kind: "box", box: [x, y, width, height] })),
    },
  );

/** Two to five people who draw noisy versions of the same few shapes, and some of their own. */
const labels = (): fc.Arbitrary<ImageLabels> =>
  fc
    .record({
      objects: fc.array(fc.record({ shape: shape(), classId: fc.constantFrom("can", "cap") }), {
        minLength: 1,
        maxLength: 4,
      }),
      people: fc.array(
        fc.record({
          seen: fc.array(fc.boolean(), { minLength: 4, maxLength: 4 }),
          shift: fc.tuple(fc.integer({ min: -5, max: 5 }), fc.integer({ min: -5, max: 5 })),
          own: fc.option(shape(), { nil: undefined }),
        }),
        { minLength: 2, maxLength: 5 },
      ),
    })
    .map(({ objects, people }) => ({
      width: SIZE,
      height: SIZE,
      annotators: people.map(({ seen, shift, own }, a) => {
        const instances: LabelledInstance[] = objects
          .filter((_, k) => seen[k])
          .map(({ shape: drawn, classId }, k) => ({
            id: `i${k}`,
            classId,
            shape: moved(drawn, shift[0], shift[1]),
          }));
        if (own) instances.push({ id: "own", classId: "can", shape: own });
        return { annotatorId: `p${a}`, instances };
      }),
    }));

function mapped(drawn: Shape, point: (x: number, y: number) => Point): Shape {
  if (drawn.kind === "polygon")
    return { kind: "polygon", rings: drawn.rings.map((one) => one.map(([x, y]) => point(x, y))) };
  const [x, y, width, height] = drawn.box;
  const [ax, ay] = point(x, y);
  const [bx, by] = point(x + width, y + height);
  return { kind: "box", box: [Math.min(ax, bx), Math.min(ay, by), Math.abs(bx - ax), Math.abs(by - ay)] };
}

const moved = (drawn: Shape, dx: number, dy: number) => mapped(drawn, (x, y) => [x + dx, y + dy]);

const mappedLabels = (
  image: ImageLabels,
  point: (x: number, y: number) => Point,
  scale = 1,
): ImageLabels => ({
  width: image.width * scale,
  height: image.height * scale,
  annotators: image.annotators.map(({ annotatorId, instances }) => ({
    annotatorId,
    instances: instances.map((instance) => ({ ...instance, shape: mapped(instance.shape, point) })),
  })),
});

const pick = { numRuns: 40 };

describe("overlap on rows", () => {
  it("is symmetric, in 0..1, 1 for itself, and the parts never exceed the wholes", () => {
    fc.assert(
      fc.property(shape(), shape(), (a, b) => {
        const [x, y] = [spansOf(a), spansOf(b)];
        expect(regionIou(x, y)).toBeCloseTo(regionIou(y, x), 12);
        expect(drawnIou(x, y)).toBeGreaterThanOrEqual(0);
        expect(drawnIou(x, y)).toBeLessThanOrEqual(1 + 1e-12);
        expect(regionIou(x, spansOf(a))).toBeCloseTo(1, 12);
        const { commonPx2, aPx2, bPx2 } = overlapOf(x, y);
        expect(commonPx2).toBeLessThanOrEqual(Math.min(aPx2, bPx2) * (1 + 1e-9));
      }),
      pick,
    );
  });

  it("gives the shoelace area of a ring to within two per cent", () => {
    fc.assert(
      fc.property(ring(), (one) => {
        const exact = Math.abs(ringArea(one));
        const sampled = spansOf({ kind: "polygon", rings: [one] }).areaPx2;
        expect(Math.abs(sampled - exact)).toBeLessThan(0.02 * exact + 2);
      }),
      pick,
    );
  });
});

describe("merging", () => {
  it("does not depend on the order of annotators or of their instances", () => {
    fc.assert(
      fc.property(labels(), fc.integer({ min: 1, max: 1000 }), (image, seed) => {
        const order = <T>(list: readonly T[]): T[] =>
          seed % 2 ? [...list].reverse() : [...list.slice(1), ...list.slice(0, 1)];
        const shuffled: ImageLabels = {
          ...image,
          annotators: order(image.annotators).map((one) => ({ ...one, instances: order(one.instances) })),
        };
        for (const method of CONSENSUS_METHODS) {
          const [a, b] = [mergeImage(image, { method }), mergeImage(shuffled, { method })];
          expect(b).toEqual(a);
        }
      }),
      pick,
    );
  });

  it("accounts for every instance: a member of one agreed object, left out with a reason, or explained", () => {
    fc.assert(
      fc.property(labels(), (image) => {
        const { agreed, leftOut, scores } = mergeImage(image);
        const places = [
          ...agreed.flatMap(({ members }) =>
            members.map(({ annotatorId, instanceId }) => `${annotatorId}/${instanceId}`),
          ),
          ...leftOut.map(({ annotatorId, instanceId }) => `${annotatorId}/${instanceId}`),
        ].sort();
        const all = image.annotators
          .flatMap(({ annotatorId, instances }) => instances.map(({ id }) => `${annotatorId}/${id}`))
          .sort();
        expect(places).toEqual(all);
        for (const score of scores) {
          expect(score.quality).toBeGreaterThanOrEqual(0);
          expect(score.quality).toBeLessThanOrEqual(1);
          const drawn = image.annotators.find(({ annotatorId }) => annotatorId === score.annotatorId)
            ?.instances.length;
          expect(score.instances).toHaveLength(drawn ?? -1);
        }
        for (const { members, support, seen, spread, score } of agreed) {
          expect(new Set(members.map(({ annotatorId }) => annotatorId)).size).toBe(members.length);
          expect(support).toBeLessThanOrEqual(seen);
          expect(spread).toBeGreaterThanOrEqual(0);
          expect(spread).toBeLessThanOrEqual(1);
          expect(score).toBeGreaterThanOrEqual(0.5);
        }
      }),
      pick,
    );
  });

  it("mirrors and scales with the image", () => {
    fc.assert(
      fc.property(labels(), (image) => {
        const here = mergeImage(image).agreed;
        const mirrored = mergeImage(mappedLabels(image, (x, y) => [SIZE - x, y])).agreed;
        const doubled = mergeImage(mappedLabels(image, (x, y) => [2 * x, 2 * y], 2)).agreed;
        expect(mirrored.map(({ support }) => support)).toEqual(here.map(({ support }) => support));
        here.forEach(({ box }, k) => {
          const size = Math.max(box[2], box[3]);
          const [mx, my, width, height] = mirrored[k]?.box ?? [NaN, NaN, NaN, NaN];
          expect(Math.abs(SIZE - mx - width - box[0])).toBeLessThan(0.05 * size + 2);
          expect(Math.abs(my - box[1])).toBeLessThan(0.05 * size + 2);
          expect(Math.abs(height - box[3])).toBeLessThan(0.05 * size + 2);
          const twice = doubled.map(
            ({ box: other }) => Math.abs(other[0] / 2 - box[0]) + Math.abs(other[2] / 2 - box[2]),
          );
          expect(Math.min(...twice)).toBeLessThan(0.1 * size + 3);
        });
      }),
      pick,
    );
  });

  it("agrees exactly on what everybody drew alike", () => {
    fc.assert(
      fc.property(ring(), (one) => {
        const drawn: Shape = { kind: "polygon", rings: [one] };
        const annotators = ["a", "b", "c"].map((annotatorId) => ({
          annotatorId,
          instances: [{ id: "x", classId: "can", shape: drawn }],
        }));
        const { agreed } = mergeImage({ width: SIZE, height: SIZE, annotators });
        expect(agreed).toHaveLength(1);
        const fused = spansOf(agreed[0]?.shape ?? drawn);
        // Corners of a spiky ring are rounded off, no more.
        expect(regionIou(fused, spansOf(drawn))).toBeGreaterThan(0.85);
      }),
      pick,
    );
  });
});

describe("clusters", () => {
  it("put every instance in exactly one, never two of one annotator together, with every method", () => {
    fc.assert(
      fc.property(labels(), (image) => {
        const prepared = prepareImage(image);
        for (const method of CONSENSUS_METHODS) {
          const clusters = cluster(prepared, method, 0.3);
          expect(clusters.flat().sort((a, b) => a - b)).toEqual(prepared.items.map((_, k) => k));
          for (const members of clusters) {
            const people = members.map((item) => prepared.items[item]?.annotator);
            expect(new Set(people).size).toBe(people.length);
          }
        }
      }),
      pick,
    );
  });
});

describe("reliability", () => {
  it("updated submission by submission is the estimate from scratch", () => {
    fc.assert(
      fc.property(fc.array(labels(), { minLength: 2, maxLength: 5 }), (images) => {
        const batch = new ReliabilityBatch();
        images.forEach((image, k) => {
          for (let n = 1; n <= image.annotators.length; n++) {
            batch.put(String(k), { ...image, annotators: image.annotators.slice(0, n) });
          }
        });
        expect(batch.estimate()).toEqual(estimateReliability(images));
      }),
      { numRuns: 25 },
    );
  });

  it("holds probabilities: every row of a confusion sums to 1 and every rate is in 0..1", () => {
    fc.assert(
      fc.property(fc.array(labels(), { minLength: 1, maxLength: 4 }), (images) => {
        const { annotators } = estimateReliability(images);
        for (const { confusion, detection, falseAlarm, quality, outlineWeight } of Object.values(
          annotators,
        )) {
          for (const row of confusion) expect(row.reduce((sum, p) => sum + p, 0)).toBeCloseTo(1, 6);
          for (const { value, low, high } of [detection, falseAlarm]) {
            expect(low).toBeGreaterThanOrEqual(0);
            expect(low).toBeLessThanOrEqual(value + 1e-9);
            expect(high).toBeGreaterThanOrEqual(value - 1e-9);
            expect(high).toBeLessThanOrEqual(1);
          }
          expect(quality).toBeLessThanOrEqual(1);
          expect(outlineWeight).toBeGreaterThan(0);
        }
      }),
      { numRuns: 30 },
    );
  });
});

it("a heat map is within 0..1 and cold where nobody or everybody drew", () => {
  fc.assert(
    fc.property(labels(), (image) => {
      const { values, width, height } = heatMap(image);
      expect(values).toHaveLength(width * height);
      expect(Math.min(...values)).toBeGreaterThanOrEqual(0);
      expect(Math.max(...values)).toBeLessThanOrEqual(1 + 1e-6);
      expect(values[0]).toBe(0);
    }),
    { numRuns: 20 },
  );
});

it("an assignment is a matching whose total no swap of two rows improves", () => {
  const matrix = fc.integer({ min: 1, max: 7 }).chain((n) =>
    fc.array(fc.array(fc.integer({ min: 0, max: 50 }), { minLength: n, maxLength: n }), {
      minLength: n,
      maxLength: n,
    }),
  );
  fc.assert(
    fc.property(matrix, (cost) => {
      const columns = [...assign(cost)];
      expect(new Set(columns).size).toBe(cost.length);
      const at = (row: number, column: number) => cost[row]?.[column] ?? NaN;
      columns.forEach((a, i) =>
        columns.forEach((b, j) => expect(at(i, a) + at(j, b)).toBeLessThanOrEqual(at(i, b) + at(j, a))),
      );
    }),
    pick,
  );
});

it("a thinned outline keeps the IoU that it promises", () => {
  fc.assert(
    fc.property(ring(), fc.double({ min: 0.001, max: 0.1, noNaN: true }), (one, loss) => {
      const area = Math.abs(ringArea(one));
      const thin = simplify([one], loss * area);
      const iou = regionIou(
        spansOf({ kind: "polygon", rings: thin }),
        spansOf({ kind: "polygon", rings: [one] }),
      );
      // Rows sample both alike, to within half a per cent.
      expect(iou).toBeGreaterThan(1 - loss - 0.02);
    }),
    pick,
  );
});
