import { describe, expect, it } from "vitest";
import { InvariantError } from "@/lib/errors";
import type { Posting } from "@/lib/ledger/posting";
import * as postings from "@/lib/ledger/postings";

const of = (posting: Posting) => Object.fromEntries(posting.map((entry) => [entry.accountId, entry.cents]));

describe("the postings of the market move exactly", () => {
  it.each<[string, Posting, Record<string, number>]>([
    ["a card payment into the wallet", postings.topUpPosting("t", 500), { stripe: -500, "wallet:t": 500 }],
    [
      "a card payment whole, with Stripe's fee out of the platform's pocket",
      postings.topUpPosting("t", 500, { feeCents: 44, bucket: "pending" }),
      { "stripe:pending": -456, processing: -44, "wallet:t": 500 },
    ],
    [
      "what was pending at Stripe to what is available there",
      postings.availablePosting(456),
      { "stripe:pending": 456, stripe: -456 },
    ],
    [
      "unspent money out of the wallet until Stripe answers",
      postings.refundStartPosting("t", 5),
      { "wallet:t": -5, "refunding:t": 5 },
    ],
    [
      "what the platform gives for a task that it broke",
      postings.goodwillPosting("t", 33),
      { "wallet:t": 33, shortfall: -33 },
    ],
    ["the same back after an appeal", postings.goodwillPosting("t", -33), { "wallet:t": -33, shortfall: 33 }],
    ["a refund out of Stripe", postings.refundSentPosting("t", 5), { "refunding:t": -5, stripe: 5 }],
    [
      "a refund for which Stripe takes a fee",
      postings.refundSentPosting("t", 5, 2),
      { "refunding:t": -5, processing: -2, stripe: 7 },
    ],
    [
      "a refused refund back into the wallet",
      postings.refundBackPosting("t", 5, "refunding"),
      { "refunding:t": -5, "wallet:t": 5 },
    ],
    [
      "a returned refund back into the wallet",
      postings.refundBackPosting("t", 5, "available"),
      { stripe: -5, "wallet:t": 5 },
    ],
    [
      "a returned refund that Stripe keeps for some days",
      postings.refundBackPosting("t", 5, "pending"),
      { "stripe:pending": -5, "wallet:t": 5 },
    ],
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
      "a pay that settles a debt first",
      postings.releasePosting({ batchId: "b", annotatorId: "a", payCents: 20, feeCents: 3, debtCents: 15 }),
      { "escrow:b": -23, "payable:a": 5, "debt:a": 15, fee: 3 },
    ],
    [
      "a transfer that comes back and is not yet available",
      postings.payoutBackPosting("a", 70, "stripe pending"),
      { "stripe:pending": -70, "payable:a": 70 },
    ],
    [
      "the wallet's part of a contested payment into the hold",
      postings.freezePosting("t", "d", 30),
      { "wallet:t": -30, "hold:d": 30 },
    ],
    [
      "the contested payment out of Stripe, with its fee",
      postings.disputeMovePosting({ disputeId: "d", amountCents: -100, feeCents: 15 }),
      { stripe: 115, processing: -15, "hold:d": -100 },
    ],
    [
      "the contested payment back to Stripe",
      postings.disputeMovePosting({ disputeId: "d", amountCents: 100, feeCents: 0, bucket: "pending" }),
      { "stripe:pending": -100, "hold:d": 100 },
    ],
    [
      "what a lost dispute lacks out of the platform's pocket",
      postings.disputeClosedPosting("t", "d", -70),
      { "hold:d": 70, loss: -70 },
    ],
    [
      "what a won dispute held back into the wallet",
      postings.disputeClosedPosting("t", "d", 30),
      { "hold:d": -30, "wallet:t": 30 },
    ],
    ["the unknown into suspense", postings.suspensePosting(12), { stripe: -12, suspense: 12 }],
    [
      "the unknown that is pending into suspense",
      postings.suspensePosting(12, "pending"),
      { "stripe:pending": -12, suspense: 12 },
    ],
  ])("%s", (_what, posting, entries) => {
    expect(of(posting)).toEqual(entries);
  });

  it("refuse a negative pay, a negative fee and an empty payout", () => {
    const parties = { batchId: "b", annotatorId: "a" };
    expect(() => postings.releasePosting({ ...parties, payCents: -1, feeCents: 0 })).toThrow(InvariantError);
    expect(() => postings.releasePosting({ ...parties, payCents: 1, feeCents: -1 })).toThrow(InvariantError);
    expect(() => postings.payoutStartPosting("a", 0)).toThrow(InvariantError);
    expect(() => postings.refundStartPosting("t", 0)).toThrow(InvariantError);
    expect(() => postings.refundSentPosting("t", 1, -1)).toThrow(InvariantError);
    expect(() => postings.topUpPosting("t", 1, { feeCents: -1 })).toThrow(InvariantError);
    expect(() => postings.freezePosting("t", "d", -1)).toThrow(InvariantError);
    expect(() => postings.releasePosting({ ...parties, payCents: 1, feeCents: 0, debtCents: -1 })).toThrow(
      InvariantError,
    );
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

  it("comes out of the wallet once the batch is closed, and goes back there", () => {
    const closed = { teamId: "t", walletCents: 500 };
    expect(
      of(postings.adjustmentPosting({ ...change, closed, payDeltaCents: 10, feeDeltaCents: 1 })),
    ).toEqual({
      "wallet:t": -11,
      "payable:a": 10,
      fee: 1,
    });
    expect(
      of(postings.adjustmentPosting({ ...change, closed, payDeltaCents: -10, feeDeltaCents: -1 })),
    ).toEqual({
      "wallet:t": 11,
      "payable:a": -10,
      fee: -1,
    });
  });

  it("is paid whole by the platform where the wallet of a closed batch lacks it", () => {
    const rise = { ...change, payDeltaCents: 10, feeDeltaCents: 1 };
    expect(of(postings.adjustmentPosting({ ...rise, closed: { teamId: "t", walletCents: 4 } }))).toEqual({
      "wallet:t": -4,
      shortfall: -7,
      "payable:a": 10,
      fee: 1,
    });
    const broken = { teamId: "t", walletCents: -1 };
    expect(() => postings.adjustmentPosting({ ...rise, closed: broken })).toThrow(InvariantError);
  });

  it("refuses to start from a negative payable or a negative debt", () => {
    const delta = { payDeltaCents: 1, feeDeltaCents: 0 };
    expect(() => postings.adjustmentPosting({ ...change, ...delta, payableCents: -1 })).toThrow(
      InvariantError,
    );
    expect(() => postings.adjustmentPosting({ ...change, ...delta, debtCents: -1 })).toThrow(InvariantError);
  });
});
