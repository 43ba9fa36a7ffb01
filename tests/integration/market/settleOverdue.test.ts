import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { ledgerViolations, findPosting } from "@/db/queries/ledger";
import { findSubmission, listRuns, listSubmissionsOf } from "@/db/queries/work";
import type { Actor } from "@/lib/auth/actor";
import { setPaused } from "@/lib/market/batches/publishBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { settleOverdue } from "@/lib/market/consensus/settleOverdue";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  cents,
  HOUR_MS,
  openMarket,
  splitImage,
  START_MS,
  strayBottles,
  work,
  type Market,
} from "@/tests/support/market";

/** `work` hands in 90 seconds after the claim. */
const HANDED_IN_MS = START_MS + 90_000;
const DUE_MS = HANDED_IN_MS + 72 * HOUR_MS;

let db: Db;
let market: Market;
let imageId: string;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3 });
  imageId = market.imageIds[0] ?? "";
});
const annotator = (index: number) => market.annotators[index] as Actor;
const payOf = (submissionId: string) => findSubmission(db, submissionId)?.payCents ?? null;

describe("work that still waits for others after 72 hours", () => {
  it("is paid then, and not a millisecond before", () => {
    const id = work(market, annotator(0), bottles());
    expect(settleOverdue({ nowMs: DUE_MS - 1 })).toEqual({ images: 0 });
    expect(payOf(id)).toBeNull();
    expect(settleOverdue({ nowMs: DUE_MS })).toEqual({ images: 1 });
    expect(payOf(id)).toBe(14);
    expect(cents(db, "payable", annotator(0).id)).toBe(14);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("leaves the picture open for the people it waits for, and says so in the run", () => {
    work(market, annotator(0), bottles());
    settleOverdue({ nowMs: DUE_MS });
    expect(findImage(db, imageId)).toMatchObject({ consensusState: "none", slotsWanted: 2 });
    expect(listRuns(db, imageId)[0]?.result.reason).toMatch(/after 72 hours/);
    expect(work(market, annotator(1), bottles(1), { nowMs: DUE_MS })).toMatch(/^sub_/);
  });

  it("is paid once: the job run again changes nothing", () => {
    work(market, annotator(0), bottles());
    settleOverdue({ nowMs: DUE_MS });
    expect(settleOverdue({ nowMs: DUE_MS + HOUR_MS })).toEqual({ images: 0 });
    expect(listRuns(db, imageId)).toHaveLength(1);
  });

  it("is paid in a paused batch too: the requester's silence does not hold it", () => {
    const id = work(market, annotator(0), bottles());
    setPaused({ actor: market.owner, nowMs: HANDED_IN_MS, batchId: market.batchId, paused: true });
    settleOverdue({ nowMs: DUE_MS });
    expect(payOf(id)).toBe(14);
  });

  it("that waits on the docket without agreement is paid by what there is, and a decision can still change it", () => {
    const ids = splitImage(market);
    expect(ids.map(payOf)).toEqual([null, null, null]);
    settleOverdue({ nowMs: DUE_MS + HOUR_MS });
    expect(ids.map(payOf).every((pay) => pay !== null)).toBe(true);
    expect(findImage(db, imageId)?.consensusState).toBe("split");
    expect(ledgerViolations(db)).toEqual([]);
  });
});

describe("a consensus that follows pay by time", () => {
  /** The first person is paid alone for three bottles; then others come in. */
  function paidAlone(boxes = bottles()): string {
    const id = work(market, annotator(0), boxes);
    settleOverdue({ nowMs: DUE_MS });
    return id;
  }

  it("does not lower what was paid, whatever it scores", () => {
    const id = paidAlone(strayBottles(0));
    const paid = payOf(id);
    expect(paid).toBe(11);
    [1, 2].forEach((index) => {
      work(market, annotator(index), bottles(index), { nowMs: DUE_MS + index * HOUR_MS });
      settleImage({ imageId, nowMs: DUE_MS + index * HOUR_MS + 120_000 });
    });
    expect(findImage(db, imageId)?.consensusState).toBe("settled");
    expect(findSubmission(db, id)).toMatchObject({ payCents: paid });
    expect(findSubmission(db, id)?.quality).toBeLessThan(0.1);
    expect(listSubmissionsOf(db, imageId).map((row) => row.payCents)).toEqual([11, 14, 14]);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("raises it by a posting linked to the first where it scores higher", () => {
    const id = work(market, annotator(0), bottles());
    work(market, annotator(1), strayBottles(1));
    settleImage({ imageId, nowMs: START_MS + 120_000 });
    expect(findImage(db, imageId)?.consensusState).toBe("short");
    settleOverdue({ nowMs: DUE_MS });
    const first = payOf(id) ?? 0;
    expect(first).toBeLessThan(14);
    work(market, annotator(2), bottles(2), { nowMs: DUE_MS });
    settleImage({ imageId, nowMs: DUE_MS + 120_000 });
    expect(payOf(id)).toBe(14);
    const kind = `adjust:${findImage(db, imageId)?.currentRunId}`;
    const raise = findPosting(db, { source: "submission", sourceId: id, kind });
    expect(raise?.memo).toBe("Pay raised by a later result");
    const release = findPosting(db, { source: "submission", sourceId: id, kind: "release" });
    expect(raise?.linkedTo ?? null).toBe(release?.id ?? null);
    expect(cents(db, "payable", annotator(0).id)).toBe(14);
    expect(ledgerViolations(db)).toEqual([]);
  });
});
