import { and, desc, eq, sql } from "drizzle-orm";
import Stripe from "stripe";
import { getDb, inTransaction } from "@/db/client";
import { balanceOf, findPosting, insertPosting } from "@/db/queries/ledger";
import { refunds, topUps } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { accountId } from "@/lib/ledger/posting";
import { refundPosting } from "@/lib/ledger/postings";
import { reversal, posting } from "@/lib/ledger/posting";
import { requireTeam } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { stripe } from "@/lib/services/stripeClient";

/**
 * Sends money of the wallet back to the cards it came from, the latest payment first. Not more than the
 * wallet holds, and not more of a payment than is left of it. Returns the cents that are on their way.
 */
export function refundWallet({
  actor,
  nowMs,
  teamId,
  amountCents,
}: {
  actor: Actor;
  nowMs: number;
  teamId: string;
  amountCents: number;
}): number {
  return inTransaction(getDb(), (tx) => {
    requireTeam(tx, teamId, actor, "owner");
    if (!Number.isInteger(amountCents) || amountCents <= 0)
      throw new AppError("invalid", "Say how much.", { amountCents: "A positive amount." });
    if (balanceOf(tx, accountId("wallet", teamId)) < amountCents)
      throw new AppError("conflict", "The wallet does not hold that much.");
    let left = amountCents;
    const payments = tx
      .select()
      .from(topUps)
      .where(and(eq(topUps.teamId, teamId), eq(topUps.status, "paid")))
      .orderBy(desc(topUps.paidAtMs))
      .all();
    for (const payment of payments) {
      const part = Math.min(left, payment.amountCents - payment.refundedCents);
      if (part <= 0) continue;
      const id = newId("out");
      tx.insert(refunds)
        .values({ id, topUpId: payment.id, teamId, amountCents: part, status: "queued", createdAtMs: nowMs })
        .run();
      tx.update(topUps)
        .set({ refundedCents: sql`${topUps.refundedCents} + ${part}` })
        .where(eq(topUps.id, payment.id))
        .run();
      insertPosting(tx, {
        source: "refund",
        sourceId: id,
        kind: "refund",
        posting: refundPosting(teamId, part),
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
      });
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

/** The job of one refund. A definite refusal books the money back to the wallet. */
export async function runRefund({ refundId, nowMs }: { refundId: string; nowMs: number }): Promise<void> {
  const db = getDb();
  const refund = db.select().from(refunds).where(eq(refunds.id, refundId)).get();
  if (!refund || refund.status !== "queued") return;
  const payment = db.select().from(topUps).where(eq(topUps.id, refund.topUpId)).get();
  invariant(payment?.stripePaymentIntentId, "a paid top-up has a payment");
  try {
    const made = await stripe().refunds.create(
      { payment_intent: payment.stripePaymentIntentId, amount: refund.amountCents, metadata: { refundId } },
      { idempotencyKey: `refund:${refundId}` },
    );
    db.update(refunds).set({ status: "sent", stripeRefundId: made.id }).where(eq(refunds.id, refundId)).run();
  } catch (error) {
    if (!(error instanceof Stripe.errors.StripeInvalidRequestError)) throw error;
    inTransaction(db, (tx) => {
      const first = findPosting(tx, { source: "refund", sourceId: refundId, kind: "refund" });
      insertPosting(tx, {
        source: "refund",
        sourceId: refundId,
        kind: "back",
        posting: reversal(posting(refundPosting(refund.teamId, refund.amountCents))),
        memo: "The card took no refund",
        linkedTo: first?.id ?? null,
        nowMs,
      });
      tx.update(topUps)
        .set({ refundedCents: sql`${topUps.refundedCents} - ${refund.amountCents}` })
        .where(eq(topUps.id, refund.topUpId))
        .run();
      tx.update(refunds)
        .set({ status: "failed", failure: error.message })
        .where(eq(refunds.id, refundId))
        .run();
    });
  }
}
