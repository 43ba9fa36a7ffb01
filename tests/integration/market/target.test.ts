import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { ledgerViolations } from "@/db/queries/ledger";
import { listRuns } from "@/db/queries/work";
import { listUnfinishedJobs } from "@/lib/jobs/queue";
import { setAgreementTarget } from "@/lib/market/batches/editBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { claimTask } from "@/lib/market/work/claimTask";
import { freshDb } from "@/tests/support/db";
import { bottles, MINUTE_MS, openMarket, START_MS, work, type Market } from "@/tests/support/market";

let db: Db;
let market: Market;
let imageId: string;
const LATER_MS = START_MS + 10 * MINUTE_MS;
const setTarget = (target: number) =>
  setAgreementTarget({ actor: market.owner, nowMs: LATER_MS, batchId: market.batchId, target });
const image = () => findImage(db, imageId);
const looks = () =>
  listUnfinishedJobs(db, market.batchId).filter(({ uniqueKey }) => uniqueKey?.includes("target"));

beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3 });
  imageId = market.imageIds[0] ?? "";
  setTarget(0.98);
  market.annotators.slice(0, 2).forEach((annotator, k) => work(market, annotator, bottles(3 * k)));
  settleImage({ imageId, nowMs: START_MS + 5 * MINUTE_MS });
  expect([image()?.consensusState, image()?.slotsWanted]).toEqual(["short", 3]);
});

describe("a lower agreement target", () => {
  it("settles a short image that reaches it, without one more annotator", () => {
    expect(setTarget(0.5)).toEqual({ lookedAgain: 1 });
    expect(image()?.slotsWanted).toBe(2);
    expect(looks()).toHaveLength(1);
    settleImage({ imageId, nowMs: LATER_MS });
    expect(image()?.consensusState).toBe("settled");
    expect(listRuns(db, imageId)).toHaveLength(2);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("leaves an image that still does not reach it", () => {
    expect(setTarget(0.97)).toEqual({ lookedAgain: 0 });
    expect(image()?.slotsWanted).toBe(3);
  });

  it("waits for somebody who is drawing in the extra place", () => {
    const third = market.annotators[2];
    if (!third) throw new Error("the market has five annotators");
    claimTask({ actor: third, nowMs: LATER_MS, batchId: market.batchId, imageId });
    expect(setTarget(0.5)).toEqual({ lookedAgain: 0 });
    expect([image()?.consensusState, image()?.slotsWanted]).toEqual(["short", 3]);
  });
});
