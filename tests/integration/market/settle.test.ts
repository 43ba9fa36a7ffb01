import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { ledgerViolations } from "@/db/queries/ledger";
import { findOpenDispute, listRuns, listSubmissionsOf } from "@/db/queries/work";
import { consensusRuns, jobs, ledgerPostings } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { closeBatch } from "@/lib/market/batches/closeBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  cents,
  letters,
  MINUTE_MS,
  openMarket,
  settledImage,
  splitImage,
  START_MS,
  strayBottles,
  work,
  type Market,
} from "@/tests/support/market";

let db: Db;
let market: Market;
let imageId: string;
let first: Actor;
let second: Actor;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3 });
  imageId = market.imageIds[0] ?? "";
  [first, second] = market.annotators as [Actor, Actor];
});

const settle = (minutes = 5) => settleImage({ imageId, nowMs: START_MS + minutes * MINUTE_MS });
const state = () => findImage(db, imageId)?.consensusState;
const released = () => db.select().from(ledgerPostings).where(eq(ledgerPostings.kind, "release")).all();
/** Base 5 and three boxes at 3 cents; the fee of 15 % of 14 cents is 2.1, floored. */
const FULL = { payCents: 14, feeCents: 2 };

describe("an image with all its submissions", () => {
  it("that agree is settled, and everybody is paid and told the score", () => {
    settledImage(market);
    expect(state()).toBe("settled");
    const scored = listSubmissionsOf(db, imageId);
    expect(scored.map(({ payCents, feeCents }) => ({ payCents, feeCents }))).toEqual([FULL, FULL]);
    expect(scored.every((row) => row.scoredRunId === findImage(db, imageId)?.currentRunId)).toBe(true);
    expect([cents(db, "payable", first.id), cents(db, "payable", second.id), cents(db, "fee")]).toEqual([
      14, 14, 4,
    ]);
    expect(cents(db, "escrow", market.batchId)).toBe(3 * 46 - 2 * 16);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("is settled once: the job run again changes nothing", () => {
    settledImage(market);
    const before = [listRuns(db, imageId), released(), listSubmissionsOf(db, imageId)];
    settle(6);
    settle(7);
    expect([listRuns(db, imageId), released(), listSubmissionsOf(db, imageId)]).toEqual(before);
  });

  it("pays what agrees: a stray extra object earns nothing", () => {
    market = openMarket(db, { imageCount: 1, kMin: 3, kMax: 3 });
    imageId = market.imageIds[0] ?? "";
    const [a, b, c] = market.annotators as [Actor, Actor, Actor];
    work(market, a, bottles());
    work(market, b, [...bottles(1), [600, 10, 30, 30]]);
    work(market, c, bottles(-1));
    settle();
    expect(state()).toBe("settled");
    expect(listSubmissionsOf(db, imageId).map((row) => row.payCents)).toEqual([14, 14, 14]);
  });

  it("pays for an empty image that everybody found empty", () => {
    work(market, first, []);
    work(market, second, []);
    settle();
    expect(state()).toBe("settled");
    expect(listSubmissionsOf(db, imageId).map((row) => row.payCents)).toEqual([5, 5]);
  });

  it("that do not agree yet asks for one more, and pays nothing until it is settled", () => {
    work(market, first, strayBottles(0));
    work(market, second, strayBottles(1));
    settle();
    expect([state(), findImage(db, imageId)?.slotsWanted]).toEqual(["short", 3]);
    expect(released()).toEqual([]);
    settle(6); // the third is not in yet: nothing happens
    expect(listRuns(db, imageId)).toHaveLength(1);
  });

  it("that cannot agree goes to the docket by itself, with the admins told and nothing paid", () => {
    splitImage(market);
    expect(state()).toBe("split");
    expect(findOpenDispute(db, imageId)).toMatchObject({ kind: "split", openedBy: null, subject: imageId });
    expect(letters(db, "docket").map((letter) => letter.to)).toEqual([market.admin.email]);
    expect(released()).toEqual([]);
    settle(60);
    expect(listRuns(db, imageId)).toHaveLength(2);
  });

  it("pays nobody who drew nothing that is there: no good faith, no base", () => {
    market = openMarket(db, { imageCount: 1, kMin: 3, kMax: 5 });
    imageId = market.imageIds[0] ?? "";
    const [a, b, spammer] = market.annotators as [Actor, Actor, Actor];
    work(market, a, bottles());
    work(market, b, bottles(1));
    work(market, spammer, [...strayBottles(3), [5, 300, 30, 30]]);
    settle();
    if (state() === "short") {
      work(market, market.annotators[3] as Actor, bottles(2), { nowMs: START_MS + 6 * MINUTE_MS });
      settle(9);
    }
    expect(state()).toBe("settled");
    const honest = listSubmissionsOf(db, imageId).filter((row) => row.annotatorId !== spammer.id);
    expect(honest.every((row) => row.payCents === 14)).toBe(true);
    expect(cents(db, "payable", spammer.id)).toBe(0);
  });

  it("is looked at once more when a submission arrived while its job ran", () => {
    work(market, first, strayBottles(0));
    work(market, second, strayBottles(1));
    settle();
    // The job still holds its key when the third person hands in.
    const job = db.select().from(jobs).where(eq(jobs.kind, "consensus.settle")).get();
    db.update(jobs)
      .set({ status: "running", lockedBy: "worker", lockedUntilMs: START_MS })
      .where(eq(jobs.id, job?.id ?? ""))
      .run();
    work(market, market.annotators[2] as Actor, bottles(), { nowMs: START_MS + 6 * MINUTE_MS });
    const open = db.select().from(jobs).where(eq(jobs.kind, "consensus.settle")).all();
    expect(open.filter((row) => row.status === "queued")).toHaveLength(1);
  });

  it("of a batch that was closed meanwhile is left alone by a late job", () => {
    work(market, first, strayBottles(0));
    work(market, second, strayBottles(1));
    closeBatch({ actor: market.owner, nowMs: START_MS + 5 * MINUTE_MS, batchId: market.batchId });
    const before = [listRuns(db, imageId), findImage(db, imageId), released()];
    settle(6);
    expect([listRuns(db, imageId), findImage(db, imageId), released()]).toEqual(before);
    expect(findOpenDispute(db, imageId)).toBeUndefined();
  });

  it("keeps its runs: they are only ever added", () => {
    settledImage(market);
    expect(() => db.update(consensusRuns).set({ agreement: 0 }).run()).toThrow(/only ever added/);
  });
});
