import { and, desc, eq, sql } from "drizzle-orm";
import Stripe from "stripe";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { balanceOf, findPosting, insertPosting, raiseAlert } from "@/db/queries/ledger";
import { refunds, teamMembers, topUps, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { formatUsd } from "@/lib/ledger/amounts";
import { accountId } from "@/lib/ledger/posting";
import { refundBackPosting, refundSentPosting, refundStartPosting } from "@/lib/ledger/postings";
import { requireTeam } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";
import { stripe } from "@/lib/services/stripeClient";
import { bookTransaction, bucketOf, transactionOf, type Transaction } from "./balanceTransactions";

type RefundRow = typeof refunds.$inferSelect;
type Input = { actor: Actor; nowMs: number; teamId: string; amountCents: number };

const ATTEMPTS_MAX = 320; // outlasts the day for which Stripe replays a failure of its own

/**
 * Sends money of the wallet back to the cards it came from, the latest payment first. Not more than the
 * wallet holds, and not more of a payment than is left of it. Returns the cents that are on their way.
 */
export function refundWallet({ actor, nowMs, teamId, amountCents }: Input): number {
  return inTransaction(getDb(), (tx) => {
    requireTeam(tx, teamId, actor, "owner");
    if (!Number.isSafeInteger(amountCents) || amountCents <= 0)
      throw new AppError("invalid", "Say how much.", { amountCents: "A positive amount." });
    if (balanceOf(tx, accountId("wallet", teamId)) < amountCents)
      throw new AppError("conflict", "The wallet does not hold that much.");
    let left = amountCents;
    const payments = tx
      .select()
      .from(topUps)
      .where(and(eq(topUps.teamId, teamId), eq(topUps.status, "paid")))
      .orderBy(desc(topUps.paidAtMs), desc(topUps.id))
      .all();
    for (const payment of payments) {
      const part = Math.min(left, payment.amountCents - payment.refundedCents);
      if (part <= 0) continue;
      beginRefund(tx, { topUpId: payment.id, teamId, amountCents: part, nowMs });
      left -= part;
    }
    if (left > 0) throw new AppError("conflict", "That is more than what is left of your card payments.");
    audit(tx, {
      actorId: actor.id,
      action: "wallet.refunded",
      subject: teamId,
      detail: { amountCents },
      nowMs,
    });
    return amountCents;
  });
}

type Part = { topUpId: string; teamId: string; amountCents: number; nowMs: number };

/** The intent of one refund: its row, its posting and its job, in one transaction. */
function beginRefund(tx: Tx, { topUpId, teamId, amountCents, nowMs }: Part): void {
  const id = newId("out");
  tx.insert(refunds).values({ id, topUpId, teamId, amountCents, status: "queued", createdAtMs: nowMs }).run();
  tx.update(topUps)
    .set({ refundedCents: sql`${topUps.refundedCents} + ${amountCents}` })
    .where(eq(topUps.id, topUpId))
    .run();
  insertPosting(tx, {
    source: "refund",
    sourceId: id,
    kind: "start",
    posting: refundStartPosting(teamId, amountCents),
    memo: "Back to the card",
    nowMs,
  });
  enqueue(tx, {
    kind: "refund.run",
    payload: { refundId: id },
    subject: teamId,
    uniqueKey: `refund:${id}`,
    nowMs,
    priority: 6,
    attemptsMax: ATTEMPTS_MAX,
  });
}

/**
 * The job of one refund. It may run again after a crash at any point: a refund that was made but not noted is
 * found among the payment's. A definite refusal books the money back to the wallet.
 */
export async function runRefund({ refundId, nowMs }: { refundId: string; nowMs: number }): Promise<void> {
  const db = getDb();
  const refund = db.select().from(refunds).where(eq(refunds.id, refundId)).get();
  if (!refund || refund.status !== "queued") return;
  const payment = db.select().from(topUps).where(eq(topUps.id, refund.topUpId)).get();
  const intentId = payment?.stripePaymentIntentId;
  invariant(intentId, "a paid top-up has a payment");
  try {
    const made = (await findRefund(refund, intentId)) ?? (await makeRefund(refund, intentId));
    await settleRefund(made.id, nowMs);
  } catch (error) {
    // A definite refusal: nothing moved. Everything else is unknown and is tried again with the same key.
    if (!(error instanceof Stripe.errors.StripeInvalidRequestError)) throw error;
    inTransaction(db, (tx) => voidRefund(tx, refundId, error.message, nowMs));
  }
}

async function findRefund(refund: RefundRow, intentId: string): Promise<Stripe.Refund | undefined> {
  for await (const made of stripe().refunds.list({ payment_intent: intentId, limit: 100 })) {
    if (made.metadata?.refundId === refund.id) return made;
  }
  return undefined;
}

function makeRefund(refund: RefundRow, intentId: string): Promise<Stripe.Refund> {
  return stripe().refunds.create(
    { payment_intent: intentId, amount: refund.amountCents, metadata: { refundId: refund.id } },
    { idempotencyKey: `refund:${refund.id}` },
  );
}

/**
 * Books a refund's present state: sent once Stripe has booked it; back in the wallet, once, when the card's
 * bank sent it back. One that nobody here asked for is left to the reconciliation.
 */
export async function settleRefund(stripeRefundId: string, nowMs: number): Promise<void> {
  const made = await stripe().refunds.retrieve(stripeRefundId);
  const refundId = made.metadata?.refundId ?? "";
  const db = getDb();
  const known = db.select().from(refunds).where(eq(refunds.id, refundId)).get();
  if (!known) {
    const detail = `Refund ${stripeRefundId} was made at Stripe and not here.`;
    inTransaction(db, (tx) => raiseAlert(tx, { what: "unknown refund", detail, nowMs }));
    return;
  }
  const outgoing = await transactionOf(made.balance_transaction);
  const returned = made.failure_balance_transaction
    ? await transactionOf(made.failure_balance_transaction)
    : null;
  inTransaction(db, (tx) => {
    noteRefund(tx, refundId, stripeRefundId, outgoing, nowMs);
    if (returned) noteReturn(tx, refundId, returned, made.failure_reason ?? "unknown", nowMs);
  });
}

function noteRefund(
  tx: Tx,
  refundId: string,
  stripeRefundId: string,
  transaction: Transaction,
  nowMs: number,
): void {
  const refund = tx.select().from(refunds).where(eq(refunds.id, refundId)).get();
  if (refund?.status !== "queued") return;
  invariant(transaction.amount === -refund.amountCents, "the refund is of its own amount");
  bookTransaction(tx, {
    transaction,
    kind: "refund",
    posting: refundSentPosting(refund.teamId, refund.amountCents, transaction.fee),
    memo: "Arrived at Stripe on its way to the card",
    linkedTo: startOf(tx, refundId),
    nowMs,
  });
  tx.update(refunds).set({ status: "sent", stripeRefundId }).where(eq(refunds.id, refundId)).run();
}

const startOf = (tx: Tx, refundId: string) =>
  findPosting(tx, { source: "refund", sourceId: refundId, kind: "start" })?.id ?? null;

/** The card's bank sent the money back some days later. */
function noteReturn(tx: Tx, refundId: string, transaction: Transaction, reason: string, nowMs: number): void {
  const refund = tx.select().from(refunds).where(eq(refunds.id, refundId)).get();
  if (refund?.status !== "sent") return;
  bookTransaction(tx, {
    transaction,
    kind: "refund-back",
    posting: refundBackPosting(refund.teamId, transaction.net, bucketOf(transaction)),
    memo: "The card's bank sent a refund back",
    linkedTo: startOf(tx, refundId),
    nowMs,
  });
  const failure = `The card's bank sent it back: ${reason.replaceAll("_", " ")}.`;
  markFailed(tx, refund, { failure, subject: "A refund came back", nowMs });
}

function voidRefund(tx: Tx, refundId: string, failure: string, nowMs: number): void {
  const refund = tx.select().from(refunds).where(eq(refunds.id, refundId)).get();
  if (refund?.status !== "queued") return;
  insertPosting(tx, {
    source: "refund",
    sourceId: refundId,
    kind: "void",
    posting: refundBackPosting(refund.teamId, refund.amountCents, "refunding"),
    memo: "The card took no refund",
    linkedTo: startOf(tx, refundId),
    nowMs,
  });
  markFailed(tx, refund, { failure, subject: "A refund did not go through", nowMs });
}

type Failed = { failure: string; subject: string; nowMs: number };

function markFailed(tx: Tx, refund: RefundRow, { failure, subject, nowMs }: Failed): void {
  tx.update(topUps)
    .set({ refundedCents: sql`${topUps.refundedCents} - ${refund.amountCents}` })
    .where(eq(topUps.id, refund.topUpId))
    .run();
  tx.update(refunds).set({ status: "failed", failure }).where(eq(refunds.id, refund.id)).run();
  for (const to of listOwners(tx, refund.teamId)) {
    const lines = [
      `The refund of ${formatUsd(refund.amountCents)} did not reach the card: ${failure}`,
      "The money is in the wallet again. You can ask for it once more, or spend it on a batch.",
    ];
    post(tx, { to, subject, lines, action: { label: "Wallet", path: "/wallet" }, tag: "refund" }, nowMs);
  }
}

/** The owners of a team: those who may ask for a refund. */
function listOwners(tx: Tx, teamId: string): string[] {
  return tx
    .select({ email: users.email })
    .from(teamMembers)
    .innerJoin(users, eq(users.id, teamMembers.userId))
    .where(and(eq(teamMembers.teamId, teamId), eq(teamMembers.role, "owner")))
    .all()
    .map(({ email }) => email);
}
