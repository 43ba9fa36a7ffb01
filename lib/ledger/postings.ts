import { invariant } from "@/lib/errors";
import { requireCents, requireNonNegative } from "./amounts";
import { accountId, posting, type AccountId, type Posting } from "./posting";

/** Whether Stripe lets us use the money already, or keeps it for some days first. */
export type StripeBucket = "available" | "pending";

/** The account that mirrors one part of the platform's balance at Stripe. */
export function stripeAccount(bucket: StripeBucket = "available"): AccountId {
  return bucket === "pending" ? accountId("stripe", "pending") : accountId("stripe");
}

/**
 * A card payment has arrived: the wallet holds all of it, Stripe keeps it for us less its fee, and the fee is
 * the platform's cost. One posting, as it is one transaction at Stripe.
 */
export function topUpPosting(
  teamId: string,
  cents: number,
  { feeCents = 0, bucket = "available" }: { feeCents?: number; bucket?: StripeBucket } = {},
): Posting {
  requireNonNegative(feeCents, "Stripe's fee");
  return posting([
    { accountId: stripeAccount(bucket), cents: feeCents - cents },
    { accountId: accountId("processing"), cents: -feeCents },
    { accountId: accountId("wallet", teamId), cents },
  ]);
}

/** Money that Stripe kept as pending has become available there. */
export function availablePosting(netCents: number): Posting {
  return posting([
    { accountId: stripeAccount("pending"), cents: netCents },
    { accountId: stripeAccount(), cents: -netCents },
  ]);
}

/** Unspent money is asked back: it leaves the wallet and waits until Stripe confirms or refuses. */
export function refundStartPosting(teamId: string, cents: number): Posting {
  invariant(cents > 0, "a refund moves something");
  return posting([
    { accountId: accountId("wallet", teamId), cents: -cents },
    { accountId: accountId("refunding", teamId), cents },
  ]);
}

/** The refund left Stripe for the card. `feeCents` is what Stripe took for it, mostly nothing. */
export function refundSentPosting(teamId: string, cents: number, feeCents = 0): Posting {
  return posting([
    { accountId: accountId("refunding", teamId), cents: -cents },
    { accountId: accountId("processing"), cents: -requireNonNegative(feeCents, "Stripe's fee") },
    { accountId: stripeAccount(), cents: cents + feeCents },
  ]);
}

/** The refund could not be made, or the card's bank sent it back: the money is in the wallet again. */
export function refundBackPosting(teamId: string, cents: number, from: "refunding" | StripeBucket): Posting {
  return posting([
    { accountId: from === "refunding" ? accountId("refunding", teamId) : stripeAccount(from), cents: -cents },
    { accountId: accountId("wallet", teamId), cents },
  ]);
}

/** A batch is funded: its worst-case cost moves into escrow. */
export function fundPosting(teamId: string, batchId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("wallet", teamId), cents: -cents },
    { accountId: accountId("escrow", batchId), cents },
  ]);
}

/** A batch is closed: what is left goes back to the wallet. */
export function closePosting(teamId: string, batchId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("escrow", batchId), cents: -cents },
    { accountId: accountId("wallet", teamId), cents },
  ]);
}

type Release = {
  batchId: string;
  annotatorId: string;
  payCents: number;
  feeCents: number;
  /** What the annotator owes now, zero or more: pay settles it first. */
  debtCents?: number;
};

/** A submission is settled: pay to the annotator, fee to the platform, both out of escrow. */
export function releasePosting({
  batchId,
  annotatorId,
  payCents,
  feeCents,
  debtCents = 0,
}: Release): Posting {
  requireNonNegative(payCents, "the pay");
  requireNonNegative(feeCents, "the fee");
  const repaid = Math.min(payCents, requireNonNegative(debtCents, "the debt"));
  return posting([
    { accountId: accountId("escrow", batchId), cents: -(payCents + feeCents) },
    { accountId: accountId("payable", annotatorId), cents: payCents - repaid },
    { accountId: accountId("debt", annotatorId), cents: repaid },
    { accountId: accountId("fee"), cents: feeCents },
  ]);
}

type Adjustment = {
  batchId: string;
  annotatorId: string;
  /** New minus old pay and fee; either sign. */
  payDeltaCents: number;
  feeDeltaCents: number;
  /** What the annotator's payable holds now: a reduction beyond it becomes a debt, never a negative payable. */
  payableCents: number;
  /** What the annotator owes now, zero or more; a rise pays it off first. */
  debtCents: number;
  /** Set once the batch is closed: its escrow is gone, so the team's wallet pays and is paid. */
  closed?: { teamId: string; walletCents: number };
};

/**
 * A decision changed a pay that was posted: the difference moves, between the same parties. After the batch is
 * closed the team's wallet stands in for the escrow; what it lacks is the platform's shortfall, so that the
 * annotator gets all of what was decided.
 */
export function adjustmentPosting(change: Adjustment): Posting {
  const { batchId, annotatorId, payDeltaCents, feeDeltaCents, payableCents, debtCents, closed } = change;
  requireNonNegative(payableCents, "the payable");
  requireNonNegative(debtCents, "the debt");
  const repaid = payDeltaCents > 0 ? Math.min(payDeltaCents, debtCents) : 0;
  const owed = payDeltaCents < 0 ? Math.max(0, -payDeltaCents - payableCents) : 0;
  const billed = payDeltaCents + feeDeltaCents;
  const lacking = closed ? Math.max(0, billed - requireNonNegative(closed.walletCents, "the wallet")) : 0;
  const payer = closed ? accountId("wallet", closed.teamId) : accountId("escrow", batchId);
  return posting([
    { accountId: payer, cents: lacking - billed },
    { accountId: accountId("shortfall"), cents: -lacking },
    { accountId: accountId("payable", annotatorId), cents: payDeltaCents - repaid + owed },
    { accountId: accountId("debt", annotatorId), cents: repaid - owed },
    { accountId: accountId("fee"), cents: feeDeltaCents },
  ]);
}

/** A payout begins: the amount is on its way and cannot be asked for twice. */
export function payoutStartPosting(annotatorId: string, cents: number): Posting {
  invariant(cents > 0, "a payout moves something");
  return posting([
    { accountId: accountId("payable", annotatorId), cents: -cents },
    { accountId: accountId("transit", annotatorId), cents },
  ]);
}

/** The transfer left the platform's Stripe balance for the annotator's account. */
export function payoutSentPosting(annotatorId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("transit", annotatorId), cents: -cents },
    { accountId: stripeAccount(), cents },
  ]);
}

/** The transfer could not be made, or came back: the money is the annotator's to ask for again. */
export function payoutBackPosting(
  annotatorId: string,
  cents: number,
  from: "transit" | "stripe" | "stripe pending",
): Posting {
  const source =
    from === "transit"
      ? accountId("transit", annotatorId)
      : stripeAccount(from === "stripe" ? "available" : "pending");
  return posting([
    { accountId: source, cents: -cents },
    { accountId: accountId("payable", annotatorId), cents },
  ]);
}

/** A card dispute begins: as much of the contested amount as the wallet has is frozen. */
export function freezePosting(teamId: string, disputeId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("wallet", teamId), cents: -requireNonNegative(cents, "what is frozen") },
    { accountId: accountId("hold", disputeId), cents },
  ]);
}

type DisputeMove = {
  disputeId: string;
  /** As Stripe states it: negative when the bank takes the money, positive when it gives it back. */
  amountCents: number;
  feeCents: number;
  bucket?: StripeBucket;
};

/** Stripe took the contested amount, or gave it back; its fee is the platform's cost either way. */
export function disputeMovePosting({
  disputeId,
  amountCents,
  feeCents,
  bucket = "available",
}: DisputeMove): Posting {
  requireCents(amountCents, "the contested amount");
  return posting([
    { accountId: stripeAccount(bucket), cents: feeCents - amountCents },
    { accountId: accountId("processing"), cents: -requireCents(feeCents, "the dispute's fee") },
    { accountId: accountId("hold", disputeId), cents: amountCents },
  ]);
}

/**
 * A card dispute is over and its hold is emptied: what is left in it goes back to the wallet, what it lacks is
 * the platform's loss. Never an annotator's: their pay came out of escrow and stays theirs.
 */
export function disputeClosedPosting(teamId: string, disputeId: string, heldCents: number): Posting {
  return posting([
    { accountId: accountId("hold", disputeId), cents: -heldCents },
    heldCents > 0
      ? { accountId: accountId("wallet", teamId), cents: heldCents }
      : { accountId: accountId("loss"), cents: heldCents },
  ]);
}

/** Something at Stripe that nobody here asked for: kept apart until a person has looked at it. */
export function suspensePosting(netCents: number, bucket: StripeBucket = "available"): Posting {
  return posting([
    { accountId: stripeAccount(bucket), cents: -netCents },
    { accountId: accountId("suspense"), cents: netCents },
  ]);
}

/**
 * The product broke a task that the team paid for: the platform gives the team's wallet what was paid, and the
 * cost is its own. Negative cents take it back, when an appeal finds otherwise.
 */
export function goodwillPosting(teamId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("wallet", teamId), cents },
    { accountId: accountId("shortfall"), cents: -cents },
  ]);
}
