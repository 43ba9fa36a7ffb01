import { beforeEach, describe, expect, it } from "vitest";
import { inTransaction, type Db, type Tx } from "@/db/client";
import { balanceOf, findPosting, ledgerViolations } from "@/db/queries/ledger";
import { payouts } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { accountId } from "@/lib/ledger/posting";
import { payoutStartPosting } from "@/lib/ledger/postings";
import { insertPosting } from "@/db/queries/ledger";
import { closeBatch } from "@/lib/market/batches/closeBatch";
import { refundWallet } from "@/lib/market/money/refunds";
import { batchMoney, earnings } from "@/lib/market/money/queries";
import {
  earningsPdf,
  earningsStatement,
  invoicePdf,
  receiptPdf,
  walletPdf,
  walletStatement,
} from "@/lib/market/money/statements";
import { adjustSubmissionPay, releaseForSubmission } from "@/lib/market/money/settlement";
import { submissions, topUps } from "@/db/schema";
import { freshDb } from "@/tests/support/db";
import {
  cents,
  HOUR_MS,
  openMarket,
  person,
  refusalOf,
  settledImage,
  START_MS,
  type Market,
} from "@/tests/support/market";
import { eq } from "drizzle-orm";
import { centsOf, isAmount, textsOf } from "./pdfText";

let db: Db;
let market: Market;
let annotator: Actor;
let first: string;

beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 3, kMin: 2, kMax: 3, walletCents: 1000 });
  [first = ""] = settledImage(market); // two submissions at 14 + 2 cents
  annotator = market.annotators[0] as Actor;
});

const inside = <T>(work: (tx: Tx) => T) => inTransaction(db, work);
const payable = () => cents(db, "payable", annotator.id);
const debt = () => 0 - cents(db, "debt", annotator.id);
const paidNow = () => db.select().from(submissions).where(eq(submissions.id, first)).get();

/** A decision's correction: the row and the money, as a decision does both. */
function correct(newPayCents: number, newFeeCents: number, disputeId = "dsp_1"): void {
  const row = paidNow();
  inside((tx) => {
    adjustSubmissionPay(tx, {
      submissionId: first,
      batchId: market.batchId,
      annotatorId: annotator.id,
      cause: disputeId,
      oldPayCents: row?.payCents ?? 0,
      oldFeeCents: row?.feeCents ?? 0,
      newPayCents,
      newFeeCents,
      nowMs: START_MS + HOUR_MS,
    });
    tx.update(submissions)
      .set({ payCents: newPayCents, feeCents: newFeeCents })
      .where(eq(submissions.id, first))
      .run();
  });
}

/** All that is payable has left for the bank. */
function payOut(): void {
  const amountCents = payable();
  inside((tx) => {
    const id = "out_1";
    tx.insert(payouts)
      .values({ id, annotatorId: annotator.id, amountCents, status: "queued", createdAtMs: START_MS })
      .run();
    const posting = payoutStartPosting(annotator.id, amountCents);
    insertPosting(tx, {
      source: "payout",
      sourceId: id,
      kind: "start",
      posting,
      memo: "Payout",
      nowMs: START_MS,
    });
  });
}

const release = (submissionId: string, payCents: number, feeCents: number) =>
  inside((tx) =>
    releaseForSubmission(tx, {
      submissionId,
      batchId: market.batchId,
      annotatorId: annotator.id,
      payCents,
      feeCents,
      nowMs: START_MS,
    }),
  );

describe("pay of a submission", () => {
  it("is released once: a repeat moves nothing, and another amount is a conflict", () => {
    release("sub_new", 10, 1);
    release("sub_new", 10, 1);
    expect(payable()).toBe(14 + 10);
    expect(refusalOf(() => release("sub_new", 11, 1))).toBe("conflict");
    expect(refusalOf(() => release("sub_new", 10, 2))).toBe("conflict");
    expect(payable()).toBe(24);
  });

  it("is never more than the escrow holds", () => {
    expect(refusalOf(() => release("sub_new", 1000, 0))).toBe("conflict");
    expect(payable()).toBe(14);
  });

  it("that a decision lowers after it was paid out becomes a debt, which later pay settles first", () => {
    payOut();
    correct(4, 0);
    expect([payable(), debt()]).toEqual([0, 10]);
    expect(earnings(db, annotator.id)).toMatchObject({ debtCents: 10, earnedCents: 4 });
    release("sub_new", 6, 0);
    expect([payable(), debt()]).toEqual([0, 4]);
    release("sub_new", 6, 0); // a repeat after the debt changed is still a repeat
    expect([payable(), debt()]).toEqual([0, 4]);
    release("sub_other", 10, 0);
    expect([payable(), debt()]).toEqual([6, 0]);
    expect(earnings(db, annotator.id).earnedCents).toBe(20);
  });

  it("is corrected by a posting linked to the first, once a dispute", () => {
    correct(20, 3);
    const cause = { source: "submission", sourceId: first };
    const released = findPosting(db, { ...cause, kind: "release" });
    expect(findPosting(db, { ...cause, kind: "adjust:dsp_1" })?.linkedTo).toBe(released?.id);
    expect(payable()).toBe(20);
    expect(refusalOf(() => correct(30, 3))).toBe("conflict"); // the same dispute cannot move money twice
    correct(14, 2, "dsp_2");
    expect(payable()).toBe(14);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("that began at nothing can be corrected twice, the second time by a posting linked to the first", () => {
    const change = (cause: string, [oldPayCents, newPayCents]: [number, number]) =>
      inside((tx) =>
        adjustSubmissionPay(tx, {
          submissionId: "sub_nothing",
          batchId: market.batchId,
          annotatorId: annotator.id,
          cause,
          ...{ oldPayCents, newPayCents, oldFeeCents: 0, newFeeCents: 0 },
          nowMs: START_MS,
        }),
      );
    change("dsp_1", [0, 12]); // found without worth at first: nothing was posted
    change("dsp_2", [12, 5]);
    expect(payable()).toBe(14 + 5);
    const cause = { source: "submission", sourceId: "sub_nothing" };
    const raised = findPosting(db, { ...cause, kind: "adjust:dsp_1" });
    expect(findPosting(db, { ...cause, kind: "adjust:dsp_2" })?.linkedTo).toBe(raised?.id);
  });

  it("corrected after the batch was closed moves between annotator and wallet, and the escrow stays at zero", () => {
    closeBatch({ actor: market.owner, nowMs: START_MS + HOUR_MS, batchId: market.batchId });
    const before = cents(db, "wallet", market.teamId);
    correct(20, 3);
    expect([payable(), cents(db, "wallet", market.teamId)]).toEqual([20, before - 7]);
    correct(10, 1, "dsp_2");
    expect([payable(), cents(db, "wallet", market.teamId)]).toEqual([10, before + 5]);
    expect(cents(db, "escrow", market.batchId)).toBe(0);
    const money = batchMoney(db, market.batchId);
    expect(money.releasedCents + money.feeCents + money.returnedCents + money.remainingCents).toBe(
      money.fundedCents,
    );
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("corrected after the wallet was emptied is paid whole by the platform", () => {
    closeBatch({ actor: market.owner, nowMs: START_MS + HOUR_MS, batchId: market.batchId });
    const amountCents = cents(db, "wallet", market.teamId);
    db.insert(topUps)
      .values({
        id: "pay_1",
        teamId: market.teamId,
        createdBy: market.owner.id,
        amountCents,
        status: "paid",
        createdAtMs: 0,
      })
      .run();
    refundWallet({ actor: market.owner, nowMs: START_MS, teamId: market.teamId, amountCents });
    correct(20, 3);
    expect([payable(), cents(db, "shortfall"), cents(db, "wallet", market.teamId)]).toEqual([20, -7, 0]);
    expect(ledgerViolations(db)).toEqual([]);
  });
});

describe("papers that add up", () => {
  const amounts = (texts: readonly string[]) => texts.filter(isAmount).map(centsOf);
  const nowMs = START_MS + HOUR_MS;

  it("an annotator's statement is the ledger's, by month and by year, and its PDF sums to what it says", async () => {
    correct(20, 3);
    const month = earningsStatement(db, annotator.id, { year: 2026, month: 3 });
    expect(month.lines.map((line) => line.cents)).toEqual([14, 6]);
    expect(month.closingCents).toBe(balanceOf(db, accountId("payable", annotator.id)));
    expect(earningsStatement(db, annotator.id, { year: 2026, month: 4 })).toMatchObject({
      openingCents: 20,
      lines: [],
    });
    expect(earningsStatement(db, annotator.id, { year: 2026 }).closingCents).toBe(20);
    const { bytes, fileName } = await earningsPdf({ actor: annotator, nowMs, year: 2026, month: 3 });
    expect(fileName).toBe("merestone-earnings-2026-03.pdf");
    const [opening = 0, ...rest] = amounts(textsOf(bytes));
    const [moved, closing] = rest.slice(-2);
    const lines = rest.slice(0, -2).filter((_cents, index) => index % 2 === 0);
    expect(lines.reduce((sum, line) => sum + line, 0)).toBe(moved);
    expect(opening + (moved ?? 0)).toBe(closing);
    expect(closing).toBe(20);
  });

  it("a team's wallet statement holds payments, batches and what they returned", async () => {
    closeBatch({ actor: market.owner, nowMs, batchId: market.batchId });
    const made = walletStatement(db, market.teamId, { year: 2026 });
    expect(Object.fromEntries(made.totals)).toEqual({ topup: 1000, fund: -414, close: 382 });
    const { bytes } = await walletPdf({ actor: market.owner, nowMs, teamId: market.teamId, year: 2026 });
    expect(amounts(textsOf(bytes)).at(-1)).toBe(cents(db, "wallet", market.teamId));
  });

  it("an invoice is what was held less what came back", async () => {
    closeBatch({ actor: market.owner, nowMs, batchId: market.batchId });
    const { bytes } = await invoicePdf({ actor: market.owner, nowMs, batchId: market.batchId });
    const [pay, fee, billed, held, returned, left] = amounts(textsOf(bytes));
    expect([pay, fee, billed, held, returned, left]).toEqual([28, 4, 32, 414, 382, 0]);
    expect(textsOf(bytes)).toContain("Invoice");
  });

  it("a receipt says what was paid, and is for members of the team only", async () => {
    const row = { id: "pay_1", teamId: market.teamId, createdBy: market.owner.id, amountCents: 5000 };
    db.insert(topUps)
      .values({ ...row, status: "paid", refundedCents: 700, createdAtMs: 0, paidAtMs: START_MS })
      .run();
    db.insert(topUps)
      .values({ ...row, id: "pay_2", status: "open", createdAtMs: 0 })
      .run();
    const ask = (actor: Actor, topUpId: string) => receiptPdf({ actor, nowMs, topUpId });
    expect(amounts(textsOf((await ask(market.owner, "pay_1")).bytes))).toEqual([5000, -700, 4300]);
    await expect(ask(person(db, "requester"), "pay_1")).rejects.toMatchObject({ code: "not_found" });
    await expect(ask(market.owner, "pay_2")).rejects.toMatchObject({ code: "conflict" });
    await expect(ask(market.owner, "pay_3")).rejects.toMatchObject({ code: "not_found" });
    const stranger = { actor: person(db, "requester"), nowMs };
    await expect(invoicePdf({ ...stranger, batchId: market.batchId })).rejects.toMatchObject({
      code: "not_found",
    });
    await expect(walletPdf({ ...stranger, teamId: market.teamId, year: 2026 })).rejects.toMatchObject({
      code: "not_found",
    });
    await expect(earningsPdf({ ...stranger, year: 2026, month: 13 })).rejects.toMatchObject({
      code: "invalid",
    });
  });

  it("write names of any script without failing, and go over as many pages as they need", async () => {
    const { renderPaper } = await import("@/lib/market/money/document");
    const lines = Array.from({ length: 120 }, (_, index) => ({
      when: "2026-03-02",
      text: `Łódź 東京 line ${index} ${"long ".repeat(30)}`,
      amount: "$0.01",
    }));
    const paper = {
      title: "Straße",
      facts: [["For", "Ñandú ☂"]] as const,
      lines,
      notes: ["A note. ".repeat(60)],
    };
    const bytes = await renderPaper(paper, nowMs);
    const texts = textsOf(bytes);
    expect(texts.filter(isAmount)).toHaveLength(120);
    expect(texts).toContain("3 of 3");
    expect(Buffer.from(await renderPaper(paper, nowMs)).equals(Buffer.from(bytes))).toBe(true);
  });
});
