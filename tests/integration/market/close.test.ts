import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { ledgerViolations } from "@/db/queries/ledger";
import { listSubmissionsOf } from "@/db/queries/work";
import type { Actor } from "@/lib/auth/actor";
import { closeBatch } from "@/lib/market/batches/closeBatch";
import { setPaused } from "@/lib/market/batches/publishBatch";
import { claimTask, LEASE_MS } from "@/lib/market/work/claimTask";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  cents,
  HOUR_MS,
  join,
  openMarket,
  person,
  refusalOf,
  refusalText,
  settledImage,
  splitImage,
  START_MS,
  statusOf,
  work,
  type Market,
} from "@/tests/support/market";

let db: Db;
let market: Market;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 3, kMin: 2, kMax: 3, walletCents: 1000 });
});

const close = (actor = market.owner, nowMs = START_MS + HOUR_MS) =>
  closeBatch({ actor, nowMs, batchId: market.batchId });
const someone = (index: number) => market.annotators[index] as Actor;

describe("closing a batch", () => {
  it("returns what is unspent and leaves the escrow at zero", () => {
    settledImage(market);
    expect(close()).toEqual({ returnedCents: 3 * 3 * 46 - 2 * 16 });
    expect(cents(db, "escrow", market.batchId)).toBe(0);
    expect(cents(db, "wallet", market.teamId)).toBe(1000 - 32);
    expect(statusOf(db, market.batchId)).toBe("closed");
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("that nobody worked on returns everything", () => {
    expect(close()).toEqual({ returnedCents: 414 });
    expect(cents(db, "wallet", market.teamId)).toBe(1000);
  });

  it("pays what was handed in and not settled as it stands, a lone submission too", () => {
    const [first, second] = market.imageIds;
    work(market, someone(0), bottles(), { imageId: first });
    work(market, someone(0), bottles(), { imageId: second, nowMs: START_MS + 300_000 });
    work(market, someone(1), bottles(1), { imageId: second, nowMs: START_MS + 300_000 });
    close();
    expect(listSubmissionsOf(db, first ?? "").map((row) => row.payCents)).toEqual([14]);
    expect(listSubmissionsOf(db, second ?? "").map((row) => row.payCents)).toEqual([14, 14]);
    expect(cents(db, "payable", someone(0).id)).toBe(28);
    expect(cents(db, "escrow", market.batchId)).toBe(0);
    // The second has all it wanted and agrees: it belongs to the release although its job had not run.
    expect(findImage(db, second ?? "")?.consensusState).toBe("settled");
    expect(findImage(db, first ?? "")?.consensusState).toBe("none");
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("waits for those who draw, and not for those whose claim ran out", () => {
    claimTask({ actor: someone(0), nowMs: START_MS, batchId: market.batchId });
    expect(refusalText(() => close(market.owner, START_MS + LEASE_MS))).toMatch(/1 person is drawing/);
    expect(statusOf(db, market.batchId)).toBe("open");
    close(market.owner, START_MS + LEASE_MS + 1);
    expect(statusOf(db, market.batchId)).toBe("closed");
  });

  it("waits for disputes to be decided", () => {
    splitImage(market);
    expect(refusalText(() => close())).toMatch(/1 dispute waits/);
    expect(cents(db, "escrow", market.batchId)).toBe(414);
  });

  it("is done once, of a paused batch too, by editors of the team", () => {
    const viewer = person(db, "requester");
    join(db, market.teamId, viewer, "viewer");
    expect(refusalOf(() => close(viewer))).toBe("forbidden");
    expect(refusalOf(() => close(person(db, "requester")))).toBe("not_found");
    setPaused({ actor: market.owner, nowMs: START_MS, batchId: market.batchId, paused: true });
    close();
    expect(refusalOf(() => close())).toBe("conflict");
    expect(cents(db, "wallet", market.teamId)).toBe(1000);
  });

  it("takes no claims any more", () => {
    close();
    const attempt = () => claimTask({ actor: someone(0), nowMs: START_MS, batchId: market.batchId });
    expect(refusalOf(attempt)).toBe("conflict");
  });
});
