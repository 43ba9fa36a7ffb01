import { and, eq, isNull } from "drizzle-orm";
import type Stripe from "stripe";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { balanceOf, findPosting, insertPosting, raiseAlert } from "@/db/queries/ledger";
import { payouts, stripeEvents, topUps, users } from "@/db/schema";
import { env } from "@/lib/env";
import { AppError } from "@/lib/errors";
import { enqueue } from "@/lib/jobs/queue";
import { accountId } from "@/lib/ledger/posting";
import {
  chargebackPosting,
  payoutBackPosting,
  processingFeePosting,
  topUpPosting,
} from "@/lib/ledger/postings";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";
import { stripe } from "@/lib/services/stripeClient";

/**
 * Takes one delivery of the webhook: verifies the signature over the raw body, keeps the event once and
 * queues it, all before answering. A forged one is refused and changes nothing; a duplicate is answered
 * as the first was.
 */
export function receiveStripeEvent({
  body,
  signature,
  nowMs,
}: {
  body: string;
  signature: string | null;
  nowMs: number;
}): void {
  let event: Stripe.Event;
  try {
    event = stripe().webhooks.constructEvent(body, signature ?? "", env().STRIPE_WEBHOOK_SECRET);
  } catch (cause) {
    throw new AppError("forbidden", "The signature does not fit.", {}, { cause });
  }
  inTransaction(getDb(), (tx) => {
    const kept = tx
      .insert(stripeEvents)
      .values({
        id: event.id,
        type: event.type,
        account: event.account ?? null,
        payload: event as unknown as { data: { object: { id: string } } },
        receivedAtMs: nowMs,
      })
      .onConflictDoNothing()
      .run();
    if (kept.changes === 0) return;
    enqueue(tx, {
      kind: "stripe.event",
      payload: { eventId: event.id },
      uniqueKey: `stripe:${event.id}`,
      nowMs,
      priority: 8,
    });
  });
}

/**
 * Acts on one kept event. Events come late, twice and out of order, so the object is fetched again and its
 * present state decides; every posting is keyed by its cause.
 */
export async function processStripeEvent({
  eventId,
  nowMs,
}: {
  eventId: string;
  nowMs: number;
}): Promise<void> {
  const db = getDb();
  const event = db.select().from(stripeEvents).where(eq(stripeEvents.id, eventId)).get();
  if (!event || event.processedAtMs !== null) return;
  const objectId = event.payload.data.object.id;
  if (event.type.startsWith("checkout.session.")) await settleCheckout(objectId, nowMs);
  else if (event.type === "account.updated") await refreshAccount(objectId);
  else if (event.type.startsWith("payout.") && event.account)
    await settlePayout(objectId, event.account, nowMs);
  else if (event.type === "charge.dispute.created") await bookChargeback(objectId, nowMs);
  db.update(stripeEvents).set({ processedAtMs: nowMs }).where(eq(stripeEvents.id, eventId)).run();
}

async function settleCheckout(sessionId: string, nowMs: number): Promise<void> {
  const session = await stripe().checkout.sessions.retrieve(sessionId, {
    expand: ["payment_intent.latest_charge.balance_transaction"],
  });
  const db = getDb();
  const topUp = db
    .select()
    .from(topUps)
    .where(eq(topUps.id, session.client_reference_id ?? ""))
    .get();
  if (!topUp) {
    inTransaction(db, (tx) =>
      raiseAlert(tx, {
        what: "unknown payment",
        detail: `Checkout ${sessionId} belongs to no top-up of ours.`,
        nowMs,
      }),
    );
    return;
  }
  if (session.status === "expired") {
    db.update(topUps)
      .set({ status: "expired" })
      .where(and(eq(topUps.id, topUp.id), eq(topUps.status, "open")))
      .run();
    return;
  }
  if (session.payment_status !== "paid") return;
  const intent = typeof session.payment_intent === "object" ? session.payment_intent : null;
  const charge = intent && typeof intent.latest_charge === "object" ? intent.latest_charge : null;
  const balance =
    charge && typeof charge.balance_transaction === "object" ? charge.balance_transaction : null;
  inTransaction(db, (tx) => {
    const paidCents = session.amount_total ?? 0;
    insertPosting(tx, {
      source: "stripe",
      sourceId: charge?.id ?? sessionId,
      kind: "topup",
      posting: topUpPosting(topUp.teamId, paidCents),
      memo: "Card payment",
      nowMs,
    });
    if (balance && balance.fee > 0) {
      insertPosting(tx, {
        source: "stripe",
        sourceId: charge?.id ?? sessionId,
        kind: "fee",
        posting: processingFeePosting(balance.fee),
        memo: "Stripe's fee for a card payment",
        nowMs,
      });
    }
    tx.update(topUps)
      .set({
        status: "paid",
        paidAtMs: topUp.paidAtMs ?? nowMs,
        stripePaymentIntentId: intent?.id ?? null,
        stripeChargeId: charge?.id ?? null,
      })
      .where(eq(topUps.id, topUp.id))
      .run();
    if (topUp.status === "open") {
      audit(tx, {
        actorId: topUp.createdBy,
        action: "wallet.topped-up",
        subject: topUp.teamId,
        detail: { amountCents: paidCents },
        nowMs,
      });
    }
  });
}

async function refreshAccount(accountIdAtStripe: string): Promise<void> {
  const account = await stripe().accounts.retrieve(accountIdAtStripe);
  const isReady = account.payouts_enabled === true && account.capabilities?.transfers === "active";
  getDb()
    .update(users)
    .set({ payoutsEnabled: isReady })
    .where(eq(users.stripeAccountId, accountIdAtStripe))
    .run();
}

async function settlePayout(payoutIdAtStripe: string, account: string, nowMs: number): Promise<void> {
  const db = getDb();
  const found = await stripe().payouts.retrieve(payoutIdAtStripe, {}, { stripeAccount: account });
  const payout =
    db.select().from(payouts).where(eq(payouts.stripePayoutId, payoutIdAtStripe)).get() ??
    db
      .select()
      .from(payouts)
      .where(eq(payouts.id, found.metadata?.payoutId ?? ""))
      .get();
  if (!payout) {
    inTransaction(db, (tx) =>
      raiseAlert(tx, {
        what: "unknown payout",
        detail: `Payout ${payoutIdAtStripe} belongs to nobody here.`,
        nowMs,
      }),
    );
    return;
  }
  if (found.status === "paid") {
    db.update(payouts)
      .set({ status: "paid", stripePayoutId: payoutIdAtStripe, paidAtMs: nowMs })
      .where(and(eq(payouts.id, payout.id), eq(payouts.status, "sent")))
      .run();
    return;
  }
  if (found.status !== "failed" && found.status !== "canceled") return;
  if (payout.status === "failed" || !payout.stripeTransferId) return;
  // The bank sent it back to the connected account: fetch it home, and let the annotator ask again.
  await stripe().transfers.createReversal(
    payout.stripeTransferId,
    { amount: payout.amountCents },
    { idempotencyKey: `reversal:${payout.id}` },
  );
  inTransaction(db, (tx) =>
    restorePayable(tx, payout, found.failure_message ?? "The bank sent it back.", "stripe", nowMs),
  );
}

/** Books a payout that did not arrive back to the annotator, once, with mail. */
export function restorePayable(
  tx: Tx,
  payout: typeof payouts.$inferSelect,
  failure: string,
  from: "transit" | "stripe",
  nowMs: number,
): void {
  const sent = findPosting(tx, {
    source: "payout",
    sourceId: payout.id,
    kind: from === "stripe" ? "sent" : "start",
  });
  insertPosting(tx, {
    source: "payout",
    sourceId: payout.id,
    kind: "back",
    posting: payoutBackPosting(payout.annotatorId, payout.amountCents, from),
    memo: "Payout came back",
    linkedTo: sent?.id ?? null,
    nowMs,
  });
  tx.update(payouts).set({ status: "failed", failure }).where(eq(payouts.id, payout.id)).run();
  const person = tx.select().from(users).where(eq(users.id, payout.annotatorId)).get();
  if (person) {
    post(
      tx,
      {
        to: person.email,
        subject: "Your payout came back",
        lines: [
          `The payout of $${(payout.amountCents / 100).toFixed(2)} did not arrive: ${failure}`,
          "The money is in your earnings again. Check the bank account and ask once more.",
        ],
        action: { label: "Earnings", path: "/earnings" },
        tag: "payout",
      },
      nowMs,
    );
  }
}

async function bookChargeback(disputeId: string, nowMs: number): Promise<void> {
  const dispute = await stripe().disputes.retrieve(disputeId);
  const chargeId = typeof dispute.charge === "string" ? dispute.charge : dispute.charge.id;
  const db = getDb();
  inTransaction(db, (tx) => {
    const topUp = tx.select().from(topUps).where(eq(topUps.stripeChargeId, chargeId)).get();
    if (!topUp)
      return raiseAlert(tx, {
        what: "unknown card dispute",
        detail: `Card dispute ${disputeId} is about no payment of ours.`,
        nowMs,
      });
    if (findPosting(tx, { source: "stripe", sourceId: disputeId, kind: "chargeback" })) return;
    const walletCents = Math.max(0, balanceOf(tx, accountId("wallet", topUp.teamId)));
    insertPosting(tx, {
      source: "stripe",
      sourceId: disputeId,
      kind: "chargeback",
      posting: chargebackPosting(topUp.teamId, dispute.amount, walletCents),
      memo: "Card dispute",
      nowMs,
    });
    tx.update(topUps).set({ status: "disputed" }).where(eq(topUps.id, topUp.id)).run();
    raiseAlert(tx, {
      what: "card dispute",
      detail: `A card holder disputes $${(dispute.amount / 100).toFixed(2)} of team ${topUp.teamId}.`,
      nowMs,
    });
  });
}

/** Kept events that no job has finished, for the reconciliation. */
export function countUnprocessedEvents(): number {
  return getDb()
    .select({ id: stripeEvents.id })
    .from(stripeEvents)
    .where(isNull(stripeEvents.processedAtMs))
    .all().length;
}
