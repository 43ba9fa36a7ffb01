import { and, eq } from "drizzle-orm";
import type Stripe from "stripe";
import { getDb, inTransaction } from "@/db/client";
import { raiseAlert } from "@/db/queries/ledger";
import { topUps } from "@/db/schema";
import { formatUsd } from "@/lib/ledger/amounts";
import { suspensePosting, topUpPosting } from "@/lib/ledger/postings";
import { audit } from "@/lib/market/audit";
import { stripe } from "@/lib/services/stripeClient";
import { bookTransaction, bucketOf, transactionOf } from "./balanceTransactions";

/**
 * Acts on the present state of a Checkout Session: a paid one credits the wallet, once, an expired one is
 * noted, and a decline leaves it open for another card.
 */
export async function settleCheckout(sessionId: string, nowMs: number): Promise<void> {
  const session = await stripe().checkout.sessions.retrieve(sessionId, { expand: ["payment_intent"] });
  const topUpId = session.client_reference_id ?? "";
  if (session.status === "expired") {
    getDb()
      .update(topUps)
      .set({ status: "expired" })
      .where(and(eq(topUps.id, topUpId), eq(topUps.status, "open")))
      .run();
    return;
  }
  const intent = typeof session.payment_intent === "object" ? session.payment_intent : null;
  const chargeId =
    typeof intent?.latest_charge === "string" ? intent.latest_charge : intent?.latest_charge?.id;
  if (session.payment_status === "paid" && chargeId) await settleCharge(chargeId, nowMs);
}

/**
 * Credits the wallet with a card payment, once: whole, while Stripe's fee is the platform's cost. A payment that
 * is none of ours goes to suspense, with an alert.
 */
export async function settleCharge(chargeId: string, nowMs: number): Promise<void> {
  const charge: Stripe.Charge = await stripe().charges.retrieve(chargeId, {
    expand: ["balance_transaction"],
  });
  if (charge.status !== "succeeded" || !charge.captured) return;
  const transaction = await transactionOf(charge.balance_transaction);
  const intentId =
    typeof charge.payment_intent === "string" ? charge.payment_intent : (charge.payment_intent?.id ?? null);
  const topUpId = charge.metadata.topUpId ?? (await topUpIdOf(intentId));
  inTransaction(getDb(), (tx) => {
    const topUp = tx.select().from(topUps).where(eq(topUps.id, topUpId)).get();
    if (!topUp) {
      bookTransaction(tx, {
        transaction,
        kind: "suspense",
        posting: suspensePosting(transaction.net, bucketOf(transaction)),
        memo: "A payment that belongs to no top-up",
        nowMs,
      });
      raiseAlert(tx, {
        what: "unknown payment",
        detail: `Card payment ${charge.id} of ${formatUsd(charge.amount)} belongs to no top-up of ours.`,
        nowMs,
      });
      return;
    }
    const { isNew } = bookTransaction(tx, {
      transaction,
      kind: "topup",
      posting: topUpPosting(topUp.teamId, transaction.amount, {
        feeCents: transaction.fee,
        bucket: bucketOf(transaction),
      }),
      memo: "Card payment",
      nowMs,
    });
    if (!isNew) return;
    tx.update(topUps)
      .set({ status: "paid", paidAtMs: nowMs, stripePaymentIntentId: intentId, stripeChargeId: charge.id })
      .where(eq(topUps.id, topUp.id))
      .run();
    audit(tx, {
      actorId: topUp.createdBy,
      action: "wallet.topped-up",
      subject: topUp.teamId,
      detail: { amountCents: transaction.amount },
      nowMs,
    });
  });
}

async function topUpIdOf(intentId: string | null): Promise<string> {
  if (!intentId) return "";
  return (await stripe().paymentIntents.retrieve(intentId)).metadata.topUpId ?? "";
}
