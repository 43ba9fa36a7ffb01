import { describe, expect, it } from "vitest";
import { ringOfBox } from "@/lib/geometry/box";
import { rasteriseRings } from "@/lib/geometry/mask";
import { rleFromMask } from "@/lib/geometry/rle";
import type { Box } from "@/lib/geometry/types";
import { measureQuality } from "@/lib/quality/measure";
import { sizeOf } from "@/lib/quality/match";
import type { JudgedImage, JudgedLabel, TrueObject } from "@/lib/quality/types";

const BOTTLE = 1;
const CAP = 2;
const polygon = (...box: Box): TrueObject["shape"] => ({ kind: "polygon", rings: [ringOfBox(box)] });
const pixels = (...box: Box): TrueObject["shape"] => ({
  kind: "mask",
  rle: rleFromMask(rasteriseRings([ringOfBox(box)], 200, 100), 200, 100),
});
const image = (truth: TrueObject[], labels: JudgedLabel[]): JudgedImage => ({
  width: 200,
  height: 100,
  truth,
  labels,
});

describe("labels that equal the truth", () => {
  const objects: TrueObject[] = [
    { classId: BOTTLE, shape: polygon(10, 10, 40, 60) },
    { classId: BOTTLE, shape: pixels(60, 10, 20, 20) },
    { classId: CAP, shape: { kind: "box", box: [120, 20, 9, 9] } },
  ];
  const report = measureQuality([image(objects, objects), image(objects, objects)], { bootstrapRounds: 50 });

  it("score 1 in every figure, overall, per class and per size", () => {
    const groups = [report.overall, ...report.perClass, report.perSize.small, report.perSize.medium];
    for (const group of groups) {
      expect(group).toMatchObject({ pq: 1, sq: 1, rq: 1, meanIou: 1, boundaryIou: 1 });
      expect(group.at50).toEqual({ precision: 1, recall: 1, f1: 1 });
      expect(group.at75).toEqual({ precision: 1, recall: 1, f1: 1 });
    }
    expect(report.perSize.large).toMatchObject({ objects: 0, pq: undefined });
    expect(report.ap.box.figures.ap).toBe(1);
    expect(report.ap.mask.figures.ap).toBe(1);
    expect(report.intervals.pq).toEqual({ low: 1, high: 1 });
  });
});

describe("a worked example", () => {
  // By hand: a hit at IoU 50/70 = 5/7, a false alarm, a miss, and a label of the wrong class.
  const report = measureQuality([
    image(
      [
        { classId: BOTTLE, shape: polygon(0, 0, 10, 6) },
        { classId: BOTTLE, shape: polygon(100, 0, 10, 10) },
        { classId: CAP, shape: polygon(50, 50, 10, 10) },
      ],
      [
        { classId: BOTTLE, shape: polygon(0, 1, 10, 6), score: 0.9 },
        { classId: BOTTLE, shape: polygon(150, 50, 10, 10), score: 0.8 },
        { classId: BOTTLE, shape: polygon(50, 50, 10, 10), score: 0.7 },
      ],
    ),
  ]);

  it("counts each object and label once, within its class", () => {
    expect(report.overall).toMatchObject({ objects: 3, labels: 3 });
    expect(report.overall.at50.precision).toBeCloseTo(1 / 3, 12);
    expect(report.overall.at50.recall).toBeCloseTo(1 / 3, 12);
    expect(report.overall.at75).toMatchObject({ precision: 0, recall: 0, f1: 0 });
    expect(report.overall.meanIou).toBeCloseTo(5 / 7, 12);
  });

  it("takes panoptic quality as the mean over classes", () => {
    const [bottle, cap] = report.perClass;
    // One hit, two false alarms, one miss: RQ = 1 / (1 + 1 + 1/2).
    expect(bottle).toMatchObject({
      classId: BOTTLE,
      sq: expect.closeTo(5 / 7, 12),
      rq: expect.closeTo(0.4, 12),
    });
    expect(cap).toMatchObject({ classId: CAP, pq: 0, sq: 0, rq: 0 });
    expect(report.overall.pq).toBeCloseTo(((5 / 7) * 0.4) / 2, 12);
  });

  it("gives no interval for a single image", () => {
    expect(report.intervals.pq).toBeUndefined();
  });
});

describe("special cases", () => {
  it("neither reward nor punish labels inside a crowd", () => {
    const crowd: TrueObject = { classId: BOTTLE, shape: pixels(0, 0, 100, 50), isCrowd: true };
    const report = measureQuality([
      image([crowd], [{ classId: BOTTLE, shape: polygon(10, 10, 10, 10) }]),
      image([crowd], [{ classId: CAP, shape: polygon(10, 10, 10, 10) }]),
    ]);
    expect(report.overall).toMatchObject({ objects: 0, labels: 1 });
    expect(report.perClass.find(({ classId }) => classId === CAP)?.at50.precision).toBe(0);
    expect(report.ap.mask.figures.ap).toBeUndefined();
  });

  it("compare an outline with a true box by its bounds", () => {
    const diamond: JudgedLabel = {
      classId: CAP,
      shape: {
        kind: "polygon",
        rings: [
          [
            [10, 0],
            [20, 10],
            [10, 20],
            [0, 10],
          ],
        ],
      },
    };
    const report = measureQuality([
      image([{ classId: CAP, shape: { kind: "box", box: [0, 0, 20, 20] } }], [diamond]),
    ]);
    expect(report.overall.meanIou).toBe(1);
  });

  it("let one object be found once, by the label that fits best", () => {
    const report = measureQuality([
      image(
        [{ classId: BOTTLE, shape: polygon(0, 0, 20, 20) }],
        [
          { classId: BOTTLE, shape: polygon(0, 0, 20, 18) },
          { classId: BOTTLE, shape: polygon(0, 0, 20, 19) },
        ],
      ),
    ]);
    expect(report.overall.meanIou).toBeCloseTo(0.95, 12);
    expect(report.overall.at50).toMatchObject({ precision: 0.5, recall: 1 });
  });

  it("have an answer for nothing at all", () => {
    const report = measureQuality([]);
    expect(report.overall).toMatchObject({ objects: 0, labels: 0, pq: undefined, meanIou: undefined });
    expect(measureQuality([image([], [])]).overall.at50).toEqual({
      precision: undefined,
      recall: undefined,
      f1: undefined,
    });
  });

  it("sort sizes at 32 and 96 px squared", () => {
    expect([1023, 1024, 9215, 9216].map(sizeOf)).toEqual(["small", "medium", "medium", "large"]);
  });
});

it("the interval is repeatable and holds the figure", () => {
  const images = Array.from({ length: 40 }, (_, i) =>
    image(
      [{ classId: BOTTLE, shape: polygon(10, 10, 40, 40) }],
      i % 4 === 0 ? [] : [{ classId: BOTTLE, shape: polygon(10 + (i % 7), 10, 40, 40) }],
    ),
  );
  const report = measureQuality(images);
  expect(measureQuality(images)).toEqual(report);
  const { low, high } = report.intervals.recall50 ?? { low: NaN, high: NaN };
  expect(low).toBeLessThan(0.75);
  expect(high).toBeGreaterThan(0.75);
  expect(low).toBeGreaterThan(0.5);
});
