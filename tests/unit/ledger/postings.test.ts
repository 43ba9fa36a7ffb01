import { describe, expect, it } from "vitest";
import { InvariantError } from "@/lib/errors";
import type { Posting } from "@/lib/ledger/posting";
import * as postings from "@/lib/ledger/postings";

const of = (posting: Posting) => Object.fromEntries(posting.map((entry) => [entry.accountId, entry.cents]));

describe("the postings of the market move exactly", () => {
  it.each<[string, Posting, Record<string, number>]>([
    ["a card payment into the wallet", postings.topUpPosting("t", 500), { stripe: -500, "wallet:t": 500 }],
    [
      "Stripe's fee out of the platform's pocket",
      postings.processingFeePosting(44),
      { stripe: 44, processing: -44 },
    ],
    ["unspent money back to the card", postings.refundPosting("t", 5), { stripe: 5, "wallet:t": -5 }],
    ["the worst case into escrow", postings.fundPosting("t", "b", 9), { "wallet:t": -9, "escrow:b": 9 }],
    [
      "the rest of escrow into the wallet",
      postings.closePosting("t", "b", 9),
      { "wallet:t": 9, "escrow:b": -9 },
    ],
    [
      "pay and fee out of escrow",
      postings.releasePosting({ batchId: "b", annotatorId: "a", payCents: 20, feeCents: 3 }),
      { "escrow:b": -23, "payable:a": 20, fee: 3 },
    ],
    [
      "a payout out of the payable",
      postings.payoutStartPosting("a", 70),
      { "payable:a": -70, "transit:a": 70 },
    ],
    ["a transfer out of Stripe", postings.payoutSentPosting("a", 70), { "transit:a": -70, stripe: 70 }],
    [
      "a refused transfer back to the payable",
      postings.payoutBackPosting("a", 70, "transit"),
      { "transit:a": -70, "payable:a": 70 },
    ],
    [
      "a returned transfer back to the payable",
      postings.payoutBackPosting("a", 70, "stripe"),
      { stripe: -70, "payable:a": 70 },
    ],
    [
      "a card dispute out of the wallet while that lasts",
      postings.chargebackPosting("t", 100, 100),
      { stripe: 100, "wallet:t": -100 },
    ],
    [
      "what the wallet lacks out of the platform's pocket",
      postings.chargebackPosting("t", 100, 30),
      { stripe: 100, "wallet:t": -30, loss: -70 },
    ],
    ["the unknown into suspense", postings.suspensePosting(12), { stripe: -12, suspense: 12 }],
  ])("%s", (_what, posting, entries) => {
    expect(of(posting)).toEqual(entries);
  });

  it("refuse a negative pay, a negative fee and an empty payout", () => {
    const parties = { batchId: "b", annotatorId: "a" };
    expect(() => postings.releasePosting({ ...parties, payCents: -1, feeCents: 0 })).toThrow(InvariantError);
    expect(() => postings.releasePosting({ ...parties, payCents: 1, feeCents: -1 })).toThrow(InvariantError);
    expect(() => postings.payoutStartPosting("a", 0)).toThrow(InvariantError);
    expect(() => postings.chargebackPosting("t", 100, -1)).toThrow(InvariantError);
  });
});

describe("a correction of pay", () => {
  const change = { batchId: "b", annotatorId: "a", payableCents: 50, debtCents: 0 };

  it("adds what was too little", () => {
    const posting = postings.adjustmentPosting({ ...change, payDeltaCents: 10, feeDeltaCents: 1 });
    expect(of(posting)).toEqual({ "escrow:b": -11, "payable:a": 10, fee: 1 });
  });

  it("takes what was too much while the payable holds it", () => {
    const posting = postings.adjustmentPosting({ ...change, payDeltaCents: -50, feeDeltaCents: -7 });
    expect(of(posting)).toEqual({ "escrow:b": 57, "payable:a": -50, fee: -7 });
  });

  it("makes a debt of what was paid out already, and never a negative payable", () => {
    const posting = postings.adjustmentPosting({ ...change, payDeltaCents: -80, feeDeltaCents: -12 });
    expect(of(posting)).toEqual({ "escrow:b": 92, "payable:a": -50, "debt:a": -30, fee: -12 });
  });

  it("pays an old debt first", () => {
    const indebted = { ...change, debtCents: 30, feeDeltaCents: 0 };
    expect(of(postings.adjustmentPosting({ ...indebted, payDeltaCents: 20 }))).toEqual({
      "escrow:b": -20,
      "debt:a": 20,
    });
    expect(of(postings.adjustmentPosting({ ...indebted, payDeltaCents: 40 }))).toEqual({
      "escrow:b": -40,
      "debt:a": 30,
      "payable:a": 10,
    });
  });

  it("refuses to start from a negative payable or a negative debt", () => {
    const delta = { payDeltaCents: 1, feeDeltaCents: 0 };
    expect(() => postings.adjustmentPosting({ ...change, ...delta, payableCents: -1 })).toThrow(
      InvariantError,
    );
    expect(() => postings.adjustmentPosting({ ...change, ...delta, debtCents: -1 })).toThrow(InvariantError);
  });
});
