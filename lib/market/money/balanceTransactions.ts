import type Stripe from "stripe";
import type { Tx } from "@/db/client";
import {
  entriesOf,
  findPosting,
  findStripePosting,
  insertPosting,
  type PostingRow,
} from "@/db/queries/ledger";
import { invariant } from "@/lib/errors";
import { posting, reversal, type Posting } from "@/lib/ledger/posting";
import type { StripeBucket } from "@/lib/ledger/postings";
import { stripe } from "@/lib/services/stripeClient";

/** What of a Stripe balance transaction is booked. Amounts in cents, as Stripe signs them. */
export type Transaction = Pick<
  Stripe.BalanceTransaction,
  "id" | "amount" | "fee" | "net" | "status" | "type" | "created"
> & { source: string | null };

export function toTransaction(row: Stripe.BalanceTransaction): Transaction {
  const { id, amount, fee, net, status, type, created } = row;
  const source = typeof row.source === "string" ? row.source : (row.source?.id ?? null);
  return { id, amount, fee, net, status, type, created, source };
}

/** The balance transaction that an object of Stripe's names, fetched unless it came along. */
export async function transactionOf(
  named: string | Stripe.BalanceTransaction | null | undefined,
): Promise<Transaction> {
  // Stripe books a moment after it answers: the job that asked comes again.
  if (!named) throw new Error("Stripe has not booked this yet");
  return toTransaction(
    typeof named === "string" ? await stripe().balanceTransactions.retrieve(named) : named,
  );
}

/** Where Stripe keeps the money: what comes in may be pending, what goes out is out at once. */
export function bucketOf({ net, status }: Pick<Transaction, "net" | "status">): StripeBucket {
  return net > 0 && status === "pending" ? "pending" : "available";
}

type Booking = {
  transaction: Pick<Transaction, "id">;
  kind: string;
  posting: Posting;
  memo: string;
  linkedTo?: string | null;
  nowMs: number;
};

/**
 * Books one balance transaction of Stripe's, once for ever: its id is the cause. One that lay in suspense is
 * taken out of it first, by a mirror linked to it. Returns whether this call booked it.
 */
export function bookTransaction(tx: Tx, booking: Booking): { row: PostingRow; isNew: boolean } {
  const { transaction, kind, posting: made, memo, linkedTo, nowMs } = booking;
  const standing = findStripePosting(tx, transaction.id);
  if (standing?.kind === "suspense" && kind !== "suspense") clearSuspense(tx, standing, nowMs);
  else if (standing) {
    invariant(standing.kind === kind, `${transaction.id} is a ${standing.kind} and cannot be a ${kind} too`);
    return { row: standing, isNew: false };
  }
  const cause = { source: "stripe", sourceId: transaction.id, kind };
  const row = insertPosting(tx, { ...cause, posting: made, memo, nowMs, linkedTo: linkedTo ?? null });
  return { row, isNew: true };
}

function clearSuspense(tx: Tx, suspended: PostingRow, nowMs: number): void {
  // What waited as pending may have become available since: it is moved back before it is mirrored.
  const moved = findPosting(tx, { source: "stripe", sourceId: suspended.sourceId, kind: "available" });
  const entries = [...entriesOf(tx, suspended.id), ...(moved ? entriesOf(tx, moved.id) : [])];
  insertPosting(tx, {
    source: "stripe",
    sourceId: suspended.sourceId,
    kind: "suspense-cleared",
    posting: reversal(posting(entries)),
    memo: "Explained, and out of suspense",
    linkedTo: suspended.id,
    nowMs,
  });
}
