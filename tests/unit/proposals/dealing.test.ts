import { describe, expect, it } from "vitest";
import type { Box } from "@/lib/geometry/types";
import { calibrationOf, judgeBySettled, type Judged } from "@/lib/proposals/dealing";
import { seeded } from "@/lib/vision/ranker";

/** Proposals whose true chance is a given function of the stated score. */
function judgedBy(chance: (score: number) => number, count: number, source = "region"): Judged[] {
  const random = seeded(5);
  return Array.from({ length: count }, () => {
    const score = 0.02 + 0.5 * random();
    return { source, score, isKept: random() < chance(score) };
  });
}

describe("the probability that people of a batch keep a proposal", () => {
  it("is what the engine said while nothing is judged, and for sources of which nothing is", () => {
    expect(calibrationOf([])(0.37, "region")).toBe(0.37);
    expect(calibrationOf(judgedBy(() => 0.9, 200))(0.37, "import")).toBe(0.37);
  });

  it("moves a little with a few verdicts and most of the way with many", () => {
    const few = calibrationOf(judgedBy(() => 0.8, 4))(0.2, "region");
    const many = calibrationOf(judgedBy(() => 0.8, 600))(0.2, "region");
    expect(few).toBeGreaterThan(0.2);
    expect(few).toBeLessThan(0.7);
    expect(many).toBeGreaterThan(0.7);
  });

  it("comes within a twentieth of the chance that made the verdicts", () => {
    const chance = (score: number) => Math.min(1, 1.6 * score);
    const calibration = calibrationOf(judgedBy(chance, 2000));
    for (const score of [0.1, 0.25, 0.4]) expect(calibration(score, "region")).toBeCloseTo(chance(score), 1);
  });

  it("keeps the order of one source whatever is judged, and stays finite at 0 and 1", () => {
    const perverse = calibrationOf(judgedBy((score) => 1 - score, 400));
    const scores = [0, 0.01, 0.2, 0.5, 0.9, 1].map((score) => perverse(score, "region"));
    scores.forEach((score, n) => {
      expect(score).toBeGreaterThan(0);
      expect(score).toBeLessThan(1);
      if (n > 0) expect(score).toBeGreaterThanOrEqual(scores[n - 1]!);
    });
  });
});

describe("a settled picture as judge of its proposals", () => {
  const at = (x: number, score: number) => ({ box: [x, 0, 40, 40] as Box, score, source: "region" });
  it("keeps the best proposal of an agreed object and no second one of the same", () => {
    const judged = judgeBySettled([at(4, 0.3), at(0, 0.9), at(200, 0.8)], [[0, 0, 40, 40]]);
    expect(judged.map(({ score, isKept }) => [score, isKept])).toEqual([
      [0.9, true],
      [0.8, false],
      [0.3, false],
    ]);
  });
  it("lets the next one have the neighbour's object", () => {
    const judged = judgeBySettled(
      [at(0, 0.9), at(20, 0.8)],
      [
        [0, 0, 40, 40],
        [18, 0, 40, 40],
      ],
    );
    expect(judged.every(({ isKept }) => isKept)).toBe(true);
  });
});
