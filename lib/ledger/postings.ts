import { invariant } from "@/lib/errors";
import { requireNonNegative } from "./amounts";
import { accountId, posting, type Posting } from "./posting";

/** A card payment has arrived: Stripe keeps it for us, the team's wallet holds it. */
export function topUpPosting(teamId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("stripe"), cents: -cents },
    { accountId: accountId("wallet", teamId), cents },
  ]);
}

/** What Stripe took for handling a payment: less with Stripe, an expense of the platform. */
export function processingFeePosting(cents: number): Posting {
  return posting([
    { accountId: accountId("stripe"), cents },
    { accountId: accountId("processing"), cents: -cents },
  ]);
}

/** Unspent money goes back to the card. */
export function refundPosting(teamId: string, cents: number): Posting {
  return posting([
    { accountId: accountId("wallet", teamId), cents: -cents },
    { accountId: accountId("stripe"), cents },
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

type Release = { batchId: string; annotatorId: string; payCents: number; feeCents: number };

/** A submission is settled: pay to the annotator, fee to the platform, both out of escrow. */
export function releasePosting({ batchId, annotatorId, payCents, feeCents }: Release): Posting {
  requireNonNegative(payCents, "the pay");
  requireNonNegative(feeCents, "the fee");
  return posting([
    { accountId: accountId("escrow", batchId), cents: -(payCents + feeCents) },
    { accountId: accountId("payable", annotatorId), cents: payCents },
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
};

/** A decision changed a pay that was posted: the difference moves, between the same parties. */
export function adjustmentPosting(change: Adjustment): Posting {
  const { batchId, annotatorId, payDeltaCents, feeDeltaCents, payableCents, debtCents } = change;
  requireNonNegative(payableCents, "the payable");
  requireNonNegative(debtCents, "the debt");
  const repaid = payDeltaCents > 0 ? Math.min(payDeltaCents, debtCents) : 0;
  const owed = payDeltaCents < 0 ? Math.max(0, -payDeltaCents - payableCents) : 0;
  return posting([
    { accountId: accountId("escrow", batchId), cents: -(payDeltaCents + feeDeltaCents) },
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
    { accountId: accountId("stripe"), cents },
  ]);
}

/** The transfer could not be made, or came back: the money is the annotator's to ask for again. */
export function payoutBackPosting(annotatorId: string, cents: number, from: "transit" | "stripe"): Posting {
  return posting([
    from === "transit"
      ? { accountId: accountId("transit", annotatorId), cents: -cents }
      : { accountId: accountId("stripe"), cents: -cents },
    { accountId: accountId("payable", annotatorId), cents },
  ]);
}

/** The card holder's bank takes a payment back while it looks into it. What the wallet lacks is held as a loss. */
export function chargebackPosting(teamId: string, cents: number, walletCents: number): Posting {
  const fromWallet = Math.min(cents, requireNonNegative(walletCents, "the wallet"));
  return posting([
    { accountId: accountId("stripe"), cents },
    { accountId: accountId("wallet", teamId), cents: -fromWallet },
    { accountId: accountId("loss"), cents: -(cents - fromWallet) },
  ]);
}

/** Something at Stripe that nobody here asked for: kept apart until a person has looked at it. */
export function suspensePosting(cents: number): Posting {
  return posting([
    { accountId: accountId("stripe"), cents: -cents },
    { accountId: accountId("suspense"), cents },
  ]);
}
