import { afterEach, beforeEach, describe, expect, it, vi } from "vitest";
import type { Db } from "@/db/client";
import { findLabelsOf, listLabelStamps } from "@/db/queries/reliability";
import { estimateReliability, ReliabilityBatch } from "@/lib/consensus/reliability";
import { reliabilityOf, RELIABILITY_IMAGES_MAX } from "@/lib/market/consensus/reliabilityOf";
import { freshDb } from "@/tests/support/db";
import { bottles, openMarket, work, type Market } from "@/tests/support/market";

let db: Db;
let market: Market;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 5, kMin: 3, kMax: 3 });
});
afterEach(() => vi.restoreAllMocks());

const settings = { kMin: 3, kMax: 3 };
const kept = () => reliabilityOf(db, { id: market.batchId }, settings);
const fromScratch = () => {
  const ids = listLabelStamps(db, market.batchId, RELIABILITY_IMAGES_MAX).map(({ imageId }) => imageId);
  return estimateReliability([...findLabelsOf(db, ids).values()], { settings });
};

/** Every number of the answer with its path, so that whole answers are compared to a tolerance. */
function numbersOf(value: unknown, path = ""): [string, number][] {
  if (typeof value === "number") return [[path, value]];
  if (typeof value !== "object" || value === null) return [];
  return Object.entries(value).flatMap(([key, inner]) => numbersOf(inner, `${path}.${key}`));
}

describe("what a batch tells of its annotators while submissions arrive", () => {
  it("is, after each one, what all of them tell from scratch, to 1e-6", () => {
    expect(kept()).toBeUndefined();
    for (let round = 0; round < 5; round++) {
      market.annotators.slice(0, 3).forEach((annotator, k) => {
        work(market, annotator, k === 2 ? [...bottles(2 + round), [400, 10, 30, 30]] : bottles(k), {
          imageId: market.imageIds[round],
        });
        const known = kept();
        if (known === undefined) return;
        const expected = numbersOf(fromScratch());
        const actual = new Map(numbersOf(known));
        expect([...actual.keys()].sort()).toEqual(expected.map(([path]) => path).sort());
        for (const [path, number] of expected)
          expect(Math.abs((actual.get(path) ?? NaN) - number), path).toBeLessThan(1e-6);
      });
    }
    expect(kept()?.annotators[market.annotators[0]?.id ?? ""]?.images).toBe(5);
  });

  it("costs the grouping of one image for each that changed, and of none otherwise", () => {
    const put = vi.spyOn(ReliabilityBatch.prototype, "put");
    for (let round = 0; round < 4; round++)
      market.annotators
        .slice(0, 3)
        .forEach((annotator, k) => work(market, annotator, bottles(k), { imageId: market.imageIds[round] }));
    kept();
    const before = put.mock.calls.length;
    kept();
    expect(put.mock.calls).toHaveLength(before);
    market.annotators
      .slice(0, 2)
      .forEach((annotator, k) => work(market, annotator, bottles(k), { imageId: market.imageIds[4] }));
    kept();
    expect(put.mock.calls).toHaveLength(before + 1);
  });
});
