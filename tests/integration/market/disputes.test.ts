import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { findPosting, ledgerViolations } from "@/db/queries/ledger";
import { findDispute, findOpenDispute, listSubmissionsOf } from "@/db/queries/work";
import { auditLog, consensusRuns, disputes, payouts, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { DecideInput } from "@/lib/contracts/work";
import { newId } from "@/lib/ids";
import type { Box } from "@/lib/geometry/types";
import { insertPosting } from "@/db/queries/ledger";
import { inTransaction } from "@/db/client";
import { accountId, posting as transfer } from "@/lib/ledger/posting";
import { payoutStartPosting } from "@/lib/ledger/postings";
import { closeBatch } from "@/lib/market/batches/closeBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { decideDispute } from "@/lib/market/disputes/decideDispute";
import { findEvidence } from "@/lib/market/disputes/evidence";
import { contestImage, contestScore, withdrawDispute } from "@/lib/market/disputes/openDispute";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  cents,
  classId,
  drawing,
  HOUR_MS,
  join,
  letters,
  openMarket,
  person,
  refusalOf,
  refusalText,
  settledImage,
  splitImage,
  START_MS,
  strayBottles,
  work,
  type Market,
} from "@/tests/support/market";

const REASON = "The second bottle is a piece of driftwood.";
const NOON_MS = START_MS + 3 * HOUR_MS;

let db: Db;
let market: Market;
let imageId: string;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3 });
  imageId = market.imageIds[0] ?? "";
});

const annotator = (index: number) => market.annotators[index] as Actor;
const redraw = (boxes: readonly Box[]): DecideInput => ({
  outcome: "redraw",
  document: drawing(classId(db, market.batchId, "bottle"), boxes),
  reason: REASON,
});
const keep: DecideInput = { outcome: "keep", reason: REASON };
const pick = (submissionId: string): DecideInput => ({ outcome: "pick", submissionId, reason: REASON });
const decide = (disputeId: string, decision: DecideInput, actor = market.admin) =>
  decideDispute({ actor, nowMs: NOON_MS, disputeId, decision });
const contest = (submissionId: string, actor = annotator(0), nowMs = NOON_MS) =>
  contestScore({ actor, nowMs, submissionId, reason: REASON });
const pays = () => listSubmissionsOf(db, imageId).map((row) => row.payCents);
const runs = () => db.select().from(consensusRuns).all().length;
const payable = (index: number) => cents(db, "payable", annotator(index).id);
const openOnDocket = () => {
  const found = findOpenDispute(db, imageId);
  if (!found) throw new Error("nothing is on the docket");
  return found.id;
};
const payOut = (index: number) =>
  inTransaction(db, (tx) => {
    const id = annotator(index).id;
    const row = { id: newId("out"), annotatorId: id, amountCents: payable(index), createdAtMs: NOON_MS };
    tx.insert(payouts)
      .values({ ...row, status: "queued" })
      .run();
    const posting = payoutStartPosting(id, payable(index));
    insertPosting(tx, {
      source: "payout",
      sourceId: row.id,
      kind: "start",
      posting,
      memo: "",
      nowMs: NOON_MS,
    });
  });

describe("contesting a score", () => {
  it("puts it on the docket with the evidence as it is now, and tells the admins", () => {
    const [submissionId] = settledImage(market) as [string];
    const dispute = findDispute(db, contest(submissionId));
    expect(dispute).toMatchObject({ kind: "score", submissionId, status: "open", openedBy: annotator(0).id });
    // The cap is 40 cents and 14 are paid: 26 more at most.
    expect(dispute?.stakeCents).toBe(26);
    expect(dispute?.evidence).toMatchObject({ briefVersion: 1 });
    expect(findEvidence(db, dispute?.id ?? "")?.snapshot).toMatchObject({
      batch: { capCents: 40 },
      image: { width: 640, height: 480 },
    });
    expect(letters(db, "docket")).toHaveLength(1);
  });

  it("is for whose score it is: another's submission is not found", () => {
    const [submissionId] = settledImage(market) as [string];
    expect(refusalOf(() => contest(submissionId, annotator(1)))).toBe("not_found");
    expect(db.select().from(disputes).all()).toEqual([]);
  });

  it("takes a score", () => {
    const ids = splitImage(market);
    expect(refusalText(() => contest(ids[0] ?? ""))).toMatch(/no score to contest yet/);
  });

  it("is over after the window, to the millisecond", () => {
    const [submissionId] = settledImage(market) as [string];
    const scoredMs = START_MS + 2 * 60_000;
    expect(refusalText(() => contest(submissionId, annotator(0), scoredMs + 72 * HOUR_MS + 1))).toMatch(
      /72 hours/,
    );
    expect(contest(submissionId, annotator(0), scoredMs + 72 * HOUR_MS)).toMatch(/^dsp_/);
  });

  it("twice is a conflict while the first is open", () => {
    const [submissionId, other] = settledImage(market) as [string, string];
    contest(submissionId);
    expect(refusalText(() => contest(submissionId))).toMatch(/on the docket already/);
    expect(contest(other, annotator(1))).toMatch(/^dsp_/);
  });

  it("can be taken back by whoever opened it, and opened again within the window", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const withdraw = (actor: Actor) => withdrawDispute({ actor, nowMs: NOON_MS, disputeId });
    expect(refusalOf(() => withdraw(annotator(1)))).toBe("not_found");
    withdraw(annotator(0));
    expect(refusalOf(() => withdraw(annotator(0)))).toBe("not_found");
    expect(refusalOf(() => decide(disputeId, keep))).toBe("conflict");
    expect(contest(submissionId)).not.toBe(disputeId);
  });

  it("again after the decision is refused, whatever it was", () => {
    const [submissionId] = settledImage(market) as [string];
    decide(contest(submissionId), keep);
    expect(refusalText(() => contest(submissionId))).toMatch(/decided/);
    market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3 });
    imageId = market.imageIds[0] ?? "";
    const [another] = settledImage(market) as [string];
    decide(contest(another), redraw(bottles()));
    expect(refusalText(() => contest(another))).toMatch(/decided/);
  });
});

describe("contesting an image", () => {
  const contestIt = (actor = market.owner, nowMs = NOON_MS) =>
    contestImage({ actor, nowMs, imageId, reason: REASON });

  it("is for editors of its team: a viewer is forbidden, an outsider finds nothing", () => {
    settledImage(market);
    const viewer = person(db, "requester");
    join(db, market.teamId, viewer, "viewer");
    expect(refusalOf(() => contestIt(viewer))).toBe("forbidden");
    expect(refusalOf(() => contestIt(person(db, "requester")))).toBe("not_found");
    expect(findDispute(db, contestIt())).toMatchObject({ kind: "image", submissionId: null });
    expect(refusalOf(() => contestIt())).toBe("conflict");
  });

  it("takes a settled image, within the window", () => {
    expect(refusalText(() => contestIt())).toMatch(/Only a settled image/);
    settledImage(market);
    expect(refusalText(() => contestIt(market.owner, START_MS + 80 * HOUR_MS))).toMatch(/72 hours/);
  });

  it("is answered once: after a decision to keep it, it cannot be contested again", () => {
    settledImage(market);
    decide(contestIt(), keep);
    expect(refusalText(() => contestIt())).toMatch(/decided/);
  });
});

describe("a decision", () => {
  it("to keep a settled image moves nothing and makes no new run", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const [runsBefore, settledAtMs] = [runs(), findImage(db, imageId)?.settledAtMs];
    expect(decide(disputeId, keep)).toEqual({ state: "decided", movedCents: 0 });
    expect([runs(), pays()]).toEqual([runsBefore, [14, 14]]);
    expect(findImage(db, imageId)?.settledAtMs).toBe(settledAtMs);
    expect(findDispute(db, disputeId)).toMatchObject({
      status: "decided",
      decision: { outcome: "keep" },
      decidedBy: market.admin.id,
      decisionReason: REASON,
    });
  });

  it("to keep a split image settles it by its last run and pays by that", () => {
    splitImage(market);
    decide(openOnDocket(), keep);
    expect(findImage(db, imageId)?.consensusState).toBe("settled");
    expect(pays().every((pay) => pay !== null)).toBe(true);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("to pick a submission pays it in full and the others by their fit with it", () => {
    const ids = splitImage(market);
    const { movedCents } = decide(openOnDocket(), pick(ids[1] ?? ""));
    expect(pays()).toEqual([0, 5 + 2 * 3, 0]);
    expect(movedCents).toBe(11);
    expect([payable(0), payable(1), payable(2)]).toEqual([0, 11, 0]);
    expect(findImage(db, imageId)).toMatchObject({ consensusState: "settled" });
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("to pick a submission of another image is refused", () => {
    splitImage(market);
    expect(refusalOf(() => decide(openOnDocket(), pick("sub_none")))).toBe("invalid");
    expect(findDispute(db, openOnDocket())?.status).toBe("open");
  });

  it("by redrawing takes pay back by a posting linked to the first", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const escrow = cents(db, "escrow", market.batchId);
    const { movedCents } = decide(disputeId, redraw(bottles().slice(0, 2)));
    expect(pays()).toEqual([11, 11]); // one bottle fewer for each
    expect(movedCents).toBe(-6);
    // Pay falls by 3 each; the fee of 11 cents is 1, one cent less each.
    expect(cents(db, "escrow", market.batchId)).toBe(escrow + 6 + 2);
    const release = findPosting(db, { source: "submission", sourceId: submissionId, kind: "release" });
    const adjust = findPosting(db, {
      source: "submission",
      sourceId: submissionId,
      kind: `adjust:${disputeId}`,
    });
    expect(adjust?.linkedTo).toBe(release?.id);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("that takes back more than is payable leaves a debt and no negative balance; a later rise pays it off", () => {
    const [submissionId] = settledImage(market) as [string];
    payOut(0);
    decide(contest(submissionId), redraw([[10, 400, 20, 20]]));
    expect(pays()).toEqual([0, 0]);
    expect([payable(0), cents(db, "debt", annotator(0).id)]).toEqual([0, -14]);
    expect([payable(1), cents(db, "debt", annotator(1).id)]).toEqual([0, 0]);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("by redrawing is held to the key and the image like any drawing", () => {
    splitImage(market);
    expect(refusalOf(() => decide(openOnDocket(), redraw([[630, 470, 50, 50]])))).toBe("invalid");
    expect(findImage(db, imageId)?.consensusState).toBe("split");
  });

  it("is made once: the second admin meets a conflict and nothing moves twice", () => {
    const ids = splitImage(market);
    const disputeId = openOnDocket();
    decide(disputeId, pick(ids[0] ?? ""));
    const before = [pays(), payable(0), runs()];
    expect(refusalText(() => decide(disputeId, pick(ids[1] ?? ""), person(db, "admin")))).toMatch(
      /decided already/,
    );
    expect([pays(), payable(0), runs()]).toEqual(before);
  });

  it("is not for somebody who took part: the opener, a member of the team, an annotator of the image", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const promoted = { ...annotator(0), role: "admin" as const };
    db.update(users).set({ role: "admin" }).where(eq(users.id, promoted.id)).run();
    expect(refusalOf(() => decide(disputeId, keep, promoted))).toBe("forbidden");
    expect(refusalOf(() => decide(disputeId, keep, { ...annotator(1), role: "admin" }))).toBe("forbidden");
    expect(refusalOf(() => decide(disputeId, keep, { ...market.owner, role: "admin" }))).toBe("forbidden");
    expect(findDispute(db, disputeId)?.status).toBe("open");
  });

  it("answers whatever else was contested about the image", () => {
    const [mine, theirs] = settledImage(market) as [string, string];
    const [one, two] = [contest(mine), contest(theirs, annotator(1))];
    decide(one, redraw(bottles()));
    expect(findDispute(db, two)).toMatchObject({ status: "decided", decisionReason: REASON });
    expect(findOpenDispute(db, imageId)).toBeUndefined();
  });

  it("is told to both sides with its reason, and written to the audit log", () => {
    const ids = splitImage(market);
    const viewer = person(db, "requester");
    join(db, market.teamId, viewer, "viewer");
    decide(openOnDocket(), pick(ids[0] ?? ""));
    const told = letters(db, "decision");
    const expected = [annotator(0), annotator(1), annotator(2), market.owner].map((who) => who.email);
    expect(told.map((letter) => letter.to).sort()).toEqual(expected.sort());
    expect(told.every((letter) => letter.text.includes(REASON))).toBe(true);
    const entry = db.select().from(auditLog).where(eq(auditLog.action, "dispute.decided")).get();
    expect(entry).toMatchObject({ actorId: market.admin.id, detail: { outcome: "pick", reason: REASON } });
  });

  it("on nothing is not found", () => {
    expect(refusalOf(() => decide("dsp_none", keep))).toBe("not_found");
  });
});

describe("a decision after the batch was closed", () => {
  const closed = (walletCents: number) => {
    market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3, walletCents });
    imageId = market.imageIds[0] ?? "";
    const [submissionId] = settledImage(market) as [string];
    decide(contest(submissionId), keep);
    closeBatch({ actor: market.owner, nowMs: NOON_MS, batchId: market.batchId });
    return contestImage({ actor: market.owner, nowMs: NOON_MS, imageId, reason: REASON });
  };

  it("gives what is taken back to the wallet: the escrow of a closed batch stays empty", () => {
    const disputeId = closed(1000);
    const wallet = cents(db, "wallet", market.teamId);
    decide(disputeId, redraw(bottles().slice(0, 2)));
    expect(cents(db, "escrow", market.batchId)).toBe(0);
    expect(cents(db, "wallet", market.teamId)).toBe(wallet + 8);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("pays what was too little out of the wallet, and out of the platform's pocket where that is empty", () => {
    const [submissionId] = [0, 1].map((index) => work(market, annotator(index), strayBottles(index)));
    settleImage({ imageId, nowMs: START_MS + 5 * 60_000 });
    closeBatch({ actor: market.owner, nowMs: NOON_MS, batchId: market.batchId });
    const earned = () => payable(0) + payable(1) + cents(db, "fee");
    const [paid, before] = [payable(0), earned()];
    const disputeId = contest(submissionId ?? "");
    refundAllBut(1);
    decide(disputeId, pick(submissionId ?? ""));
    expect(payable(0)).toBe(11);
    expect(payable(0)).toBeGreaterThan(paid);
    const raised = earned() - before;
    expect(raised).toBeGreaterThan(1);
    expect(cents(db, "wallet", market.teamId)).toBe(0);
    expect(cents(db, "shortfall")).toBe(-(raised - 1));
    expect(cents(db, "escrow", market.batchId)).toBe(0);
    expect(ledgerViolations(db)).toEqual([]);
  });

  /** Moves the wallet out but for some cents, as a refund to the card does. */
  function refundAllBut(leftCents: number): void {
    const gone = cents(db, "wallet", market.teamId) - leftCents;
    const posting = transfer([
      { accountId: accountId("wallet", market.teamId), cents: -gone },
      { accountId: accountId("stripe"), cents: gone },
    ]);
    inTransaction(db, (tx) =>
      insertPosting(tx, {
        source: "refund",
        sourceId: "all",
        kind: "refund",
        posting,
        memo: "",
        nowMs: NOON_MS,
      }),
    );
  }
});
