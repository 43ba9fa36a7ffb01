import type Stripe from "stripe";
import { getDb, inTransaction } from "@/db/client";
import { balanceOf, findPosting, findStripePosting, insertPosting, raiseAlert } from "@/db/queries/ledger";
import { ledgerViolations } from "@/db/queries/ledgerChecks";
import { listPendingStripePostings } from "@/db/queries/payments";
import { formatUsd } from "@/lib/ledger/amounts";
import { availablePosting, stripeAccount, suspensePosting } from "@/lib/ledger/postings";
import { stripe } from "@/lib/services/stripeClient";
import {
  bookTransaction,
  bucketOf,
  toTransaction,
  transactionOf,
  type Transaction,
} from "./balanceTransactions";
import { settleCardDispute } from "./cardDisputes";
import { settleCharge } from "./checkout";
import { runPayout, settleReversals } from "./payouts";
import { settleRefund } from "./refunds";

/** Side by side, in cents: positive is money that Stripe keeps for the platform. */
export type Reconciliation = {
  ledgerCents: number;
  stripeCents: number;
  ledgerPendingCents: number;
  stripePendingCents: number;
  /** Balance transactions of Stripe's that were compared, and what became of those that had no posting. */
  transactions: number;
  explained: number;
  waiting: number;
  suspended: number;
  violations: string[];
};

/** A transaction this young may still have its webhook on the way: it is not yet a difference. */
const GRACE_MS = 15 * 60_000;

/**
 * Compares the ledger with Stripe, transaction by transaction and in sum, and with itself. Each balance
 * transaction has exactly one posting: one that has none is explained from its source as its webhook would
 * have, and what cannot be explained goes to suspense. What differs raises an alert for a person. Asks Stripe
 * for 100 transactions a call, from `sinceMs` on.
 */
export async function reconcile({
  nowMs,
  sinceMs = 0,
}: {
  nowMs: number;
  sinceMs?: number;
}): Promise<Reconciliation> {
  const db = getDb();
  const counts = { transactions: 0, explained: 0, waiting: 0, suspended: 0 };
  const created = sinceMs > 0 ? { created: { gte: Math.floor(sinceMs / 1000) } } : {};
  for await (const row of stripe().balanceTransactions.list({ limit: 100, ...created })) {
    counts.transactions += 1;
    const transaction = toTransaction(row);
    const standing = findStripePosting(db, transaction.id);
    if (standing && standing.kind !== "suspense") continue;
    await explain(transaction, nowMs).catch((cause: unknown) => {
      const detail = `${transaction.type} ${transaction.id} could not be explained: ${String(cause)}`;
      raiseAlert(db, { what: "reconciliation", detail, nowMs });
    });
    const booked = findStripePosting(db, transaction.id);
    if (booked) counts.explained += booked.kind === "suspense" ? 0 : 1;
    else if (nowMs - transaction.created * 1000 < GRACE_MS) counts.waiting += 1;
    else {
      suspend(transaction, nowMs);
      counts.suspended += 1;
    }
  }
  await moveAvailable(nowMs);
  const balance = await stripe().balance.retrieve();
  const sum = (rows: Stripe.Balance.Available[]) =>
    rows.filter((row) => row.currency === "usd").reduce((total, row) => total + row.amount, 0);
  const stripePendingCents = sum(balance.pending);
  const stripeCents = sum(balance.available) + stripePendingCents;
  // "-0" would not equal 0 in a comparison by identity.
  const ledgerPendingCents = 0 - balanceOf(db, stripeAccount("pending"));
  const ledgerCents = ledgerPendingCents - balanceOf(db, stripeAccount("available"));
  const violations = ledgerViolations(db);
  for (const detail of violations) raiseAlert(db, { what: "ledger", detail, nowMs });
  if (counts.waiting === 0 && (ledgerCents !== stripeCents || ledgerPendingCents !== stripePendingCents)) {
    const detail =
      `Stripe keeps ${formatUsd(stripeCents)} (${formatUsd(stripePendingCents)} of it pending), ` +
      `the ledger says ${formatUsd(ledgerCents)} (${formatUsd(ledgerPendingCents)} pending).`;
    raiseAlert(db, { what: "Stripe differs", detail, nowMs });
  }
  return { ledgerCents, stripeCents, ledgerPendingCents, stripePendingCents, ...counts, violations };
}

/** Does what the webhook of the transaction's source would have done, by what kind of source it is. */
async function explain({ source }: Transaction, nowMs: number): Promise<void> {
  if (source === null) return;
  if (source.startsWith("ch_") || source.startsWith("py_")) await settleCharge(source, nowMs);
  else if (source.startsWith("re_") || source.startsWith("pyr_")) await settleRefund(source, nowMs);
  else if (source.startsWith("dp_") || source.startsWith("du_")) await settleCardDispute(source, nowMs);
  else if (source.startsWith("tr_")) {
    const transfer = await stripe().transfers.retrieve(source);
    if (transfer.metadata.payoutId) await runPayout({ payoutId: transfer.metadata.payoutId, nowMs });
    if (transfer.amount_reversed > 0) await settleReversals(source, nowMs);
  }
}

function suspend(transaction: Transaction, nowMs: number): void {
  inTransaction(getDb(), (tx) => {
    bookTransaction(tx, {
      transaction,
      kind: "suspense",
      posting: suspensePosting(transaction.net, bucketOf(transaction)),
      memo: `A ${transaction.type.replaceAll("_", " ")} that nobody here asked for`,
      nowMs,
    });
    const detail = `${formatUsd(transaction.net)} at Stripe (${transaction.type} ${transaction.id}) has no cause here.`;
    raiseAlert(tx, { what: "suspense", detail, nowMs });
  });
}

/** Moves what Stripe no longer keeps as pending to the account of what is available. */
async function moveAvailable(nowMs: number): Promise<void> {
  const db = getDb();
  for (const transactionId of listPendingStripePostings(db)) {
    const transaction = await transactionOf(transactionId);
    if (transaction.status !== "available") continue;
    inTransaction(db, (tx) => {
      const standing = findStripePosting(tx, transactionId);
      const cause = { source: "stripe", sourceId: transactionId, kind: "available" };
      if (!standing || findPosting(tx, cause)) return;
      const posting = availablePosting(transaction.net);
      insertPosting(tx, { ...cause, posting, memo: "Available at Stripe", linkedTo: standing.id, nowMs });
    });
  }
}
