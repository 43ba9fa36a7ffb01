import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findPredictionImport } from "@/db/queries/proposals";
import { consensusRuns, images, importedPredictions, jobs } from "@/db/schema";
import { listImages } from "@/db/queries/batches";
import { calibratedImports } from "@/lib/market/proposals/calibratedImports";
import { importPredictions, removePredictions } from "@/lib/market/proposals/importPredictions";
import { claimTask } from "@/lib/market/work/claimTask";
import { freshDb } from "@/tests/support/db";
import {
  openMarket,
  person,
  refusalOf,
  refusalText,
  settledImage,
  START_MS,
  type Market,
} from "@/tests/support/market";

let db: Db;
let market: Market;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 3, kMin: 2, kMax: 3 });
});

const by = () => ({ actor: market.owner, nowMs: START_MS, batchId: market.batchId });
const names = () => listImages(db, market.batchId, { limit: 10 }).map(({ fileName }) => fileName);
const record = (over: object = {}) => ({
  file_name: names()[0],
  category_id: 1,
  bbox: [10, 20, 30, 40],
  score: 0.8,
  ...over,
});
const list = (records: readonly object[]) =>
  `[\n${records.map((entry) => JSON.stringify(entry)).join(",\n")}\n]`;
const take = (text: string) => importPredictions({ ...by(), fileName: "own-model.json", text });
const proposing = () => db.select().from(jobs).where(eq(jobs.kind, "image.propose")).all();

describe("predictions of an own model", () => {
  it("are kept for their pictures, three wrong lines named, and untouched pictures looked at again", () => {
    const view = take(
      list([
        record(),
        record({ file_name: "x.jpg" }),
        record({ file_name: names()[1], score: 0.4 }),
        record({ category_id: 9 }),
        record({ score: "high" }),
      ]),
    );
    expect(view).toEqual({
      fileName: "own-model.json",
      used: 2,
      pictures: 2,
      wrongCount: 3,
      wrong: [
        { line: 3, reason: "unknown file_name 'x.jpg'" },
        { line: 5, reason: "the key has no class number 9" },
        { line: 6, reason: 'score is "high", not a number from 0 to 1' },
      ],
    });
    expect(findPredictionImport(db, market.batchId)).toMatchObject(view);
    expect(proposing()).toHaveLength(3);
  });

  it("leave pictures that somebody draws the proposals that they were dealt", () => {
    claimTask({ actor: market.annotators[0]!, nowMs: START_MS, batchId: market.batchId });
    take(list([record()]));
    expect(proposing()).toHaveLength(2);
  });

  it("take the place of an earlier file, and go when they are removed", () => {
    take(list([record(), record({ file_name: names()[1] })]));
    expect(take(list([record()]))).toMatchObject({ used: 1, pictures: 1 });
    expect(db.select().from(importedPredictions).all()).toHaveLength(1);
    removePredictions(by());
    expect(findPredictionImport(db, market.batchId)).toBeUndefined();
    expect(db.select().from(importedPredictions).all()).toEqual([]);
  });

  it("change nothing where the file cannot be read or nothing of it fits, and the line is named", () => {
    take(list([record()]));
    expect(refusalText(() => take('[\n{"a": 1},\n{]'))).toMatch(/line 3/);
    expect(refusalText(() => take(list([record({ file_name: "x.jpg" })])))).toMatch(
      /Line 2: unknown file_name 'x\.jpg'/,
    );
    expect(refusalOf(() => take("[]"))).toBe("invalid");
    expect(findPredictionImport(db, market.batchId)?.used).toBe(1);
  });

  it("are for editors of the batch's team only", () => {
    const stranger = person(db, "requester");
    expect(
      refusalOf(() => importPredictions({ ...by(), actor: stranger, fileName: "a.json", text: "[]" })),
    ).toBe("not_found");
  });

  it("keep their scores until a picture is settled, then say how often they were right there", () => {
    const [first, second] = listImages(db, market.batchId, { limit: 10 });
    take(
      list([
        ...Array.from({ length: 40 }, (_, n) => record({ bbox: [14 * n, 400, 12, 12], score: 0.9 })),
        record({ file_name: second!.fileName, score: 0.9 }),
      ]),
    );
    const scoreOf = () => calibratedImports(db, second!)[0]?.score ?? 0;
    expect(scoreOf()).toBe(0.9);
    settledImage(market);
    const settled = db.select().from(images).where(eq(images.id, first!.id)).get();
    expect(settled?.consensusState).toBe("settled");
    expect(db.select().from(consensusRuns).all().length).toBeGreaterThan(0);
    // None of the forty lies on an agreed bottle.
    expect(scoreOf()).toBeLessThan(0.3);
  });
});
