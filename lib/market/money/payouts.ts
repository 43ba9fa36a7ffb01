import { and, eq, inArray } from "drizzle-orm";
import Stripe from "stripe";
import { getDb, inTransaction } from "@/db/client";
import { findUser } from "@/db/queries/people";
import { balanceOf, insertPosting } from "@/db/queries/ledger";
import { payouts, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { env } from "@/lib/env";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { CURRENCY } from "@/lib/ledger/amounts";
import { accountId } from "@/lib/ledger/posting";
import { payoutSentPosting, payoutStartPosting } from "@/lib/ledger/postings";
import { audit } from "@/lib/market/audit";
import { stripe } from "@/lib/services/stripeClient";
import { restorePayable } from "./stripeEvents";

type By = { actor: Actor; nowMs: number };

/** The least that is paid out at once: below it the transfer would cost more than it brings. */
export const PAYOUT_MIN_CENTS = 100;

/** Makes the annotator's account at Stripe if there is none, and a fresh link to its onboarding. */
export async function startOnboarding({ actor }: By): Promise<{ url: string }> {
  const db = getDb();
  const user = findUser(db, actor.id);
  invariant(user, "the actor exists");
  let id = user.stripeAccountId;
  if (!id) {
    const account = await stripe().accounts.create(
      {
        type: "express",
        email: user.email,
        capabilities: { transfers: { requested: true } },
        metadata: { userId: user.id },
      },
      { idempotencyKey: `account:${user.id}` },
    );
    id = account.id;
    db.update(users).set({ stripeAccountId: id }).where(eq(users.id, user.id)).run();
  }
  const back = new URL("/earnings", env().APP_URL).href;
  const link = await stripe().accountLinks.create({
    account: id,
    refresh_url: back,
    return_url: `${back}?onboarding=done`,
    type: "account_onboarding",
  });
  return { url: link.url };
}

/** Reads the account's state again: what the page does when the annotator comes back from onboarding. */
export async function refreshOnboarding({ actor }: { actor: Actor }): Promise<boolean> {
  const user = findUser(getDb(), actor.id);
  if (!user?.stripeAccountId) return false;
  const account = await stripe().accounts.retrieve(user.stripeAccountId);
  const isReady = account.payouts_enabled === true && account.capabilities?.transfers === "active";
  getDb().update(users).set({ payoutsEnabled: isReady }).where(eq(users.id, actor.id)).run();
  return isReady;
}

/** Asks for everything that is payable. The intent and the posting come first; the job does the rest. */
export function requestPayout({ actor, nowMs }: By): { payoutId: string; amountCents: number } {
  return inTransaction(getDb(), (tx) => {
    const user = findUser(tx, actor.id);
    if (!user?.stripeAccountId || !user.payoutsEnabled)
      throw new AppError("conflict", "Set up your payout account first.");
    const amountCents = balanceOf(tx, accountId("payable", actor.id));
    if (amountCents < PAYOUT_MIN_CENTS) throw new AppError("conflict", "A payout starts at $1.00.");
    const payoutId = newId("out");
    tx.insert(payouts)
      .values({ id: payoutId, annotatorId: actor.id, amountCents, status: "queued", createdAtMs: nowMs })
      .run();
    insertPosting(tx, {
      source: "payout",
      sourceId: payoutId,
      kind: "start",
      posting: payoutStartPosting(actor.id, amountCents),
      memo: "Payout",
      nowMs,
    });
    enqueue(tx, {
      kind: "payout.run",
      payload: { payoutId },
      subject: actor.id,
      uniqueKey: `payout:${payoutId}`,
      nowMs,
      priority: 6,
    });
    audit(tx, {
      actorId: actor.id,
      action: "payout.requested",
      subject: payoutId,
      detail: { amountCents },
      nowMs,
    });
    return { payoutId, amountCents };
  });
}

/**
 * The job of one payout: one transfer to the annotator's account, then a payout to the bank. A crash at any
 * point is safe: the transfer's idempotency key carries the attempt, which rises only after a definite
 * refusal, and a transfer that was made but not noted is found by its metadata.
 */
export async function runPayout({ payoutId, nowMs }: { payoutId: string; nowMs: number }): Promise<void> {
  const db = getDb();
  const payout = db.select().from(payouts).where(eq(payouts.id, payoutId)).get();
  if (!payout || payout.status === "paid" || payout.status === "failed") return;
  const destination = findUser(db, payout.annotatorId)?.stripeAccountId;
  invariant(destination, "a payout has a destination");
  let transferId = payout.stripeTransferId;
  if (!transferId) {
    try {
      const transfer = await stripe().transfers.create(
        {
          amount: payout.amountCents,
          currency: CURRENCY,
          destination,
          transfer_group: payout.id,
          metadata: { payoutId: payout.id },
        },
        { idempotencyKey: `transfer:${payout.id}:${payout.attempt}` },
      );
      transferId = transfer.id;
    } catch (error) {
      if (error instanceof Stripe.errors.StripeInvalidRequestError && error.code === "balance_insufficient") {
        // Definite: nothing moved. Another attempt needs another key, or the refusal is replayed.
        db.update(payouts)
          .set({ attempt: payout.attempt + 1 })
          .where(eq(payouts.id, payout.id))
          .run();
        throw new Error("the platform's Stripe balance is not available yet", { cause: error });
      }
      if (error instanceof Stripe.errors.StripeInvalidRequestError) {
        inTransaction(db, (tx) =>
          restorePayable(tx, payout, "Stripe refused the transfer.", "transit", nowMs),
        );
        return;
      }
      throw error;
    }
    const madeId = transferId;
    inTransaction(db, (tx) => {
      insertPosting(tx, {
        source: "payout",
        sourceId: payout.id,
        kind: "sent",
        posting: payoutSentPosting(payout.annotatorId, payout.amountCents),
        memo: "Payout sent",
        nowMs,
      });
      tx.update(payouts)
        .set({ stripeTransferId: madeId, status: "sent" })
        .where(eq(payouts.id, payout.id))
        .run();
    });
  }
  if (!payout.stripePayoutId) {
    const bank = await stripe().payouts.create(
      { amount: payout.amountCents, currency: CURRENCY, metadata: { payoutId: payout.id } },
      { stripeAccount: destination, idempotencyKey: `payout:${payout.id}` },
    );
    db.update(payouts)
      .set({ stripePayoutId: bank.id })
      .where(and(eq(payouts.id, payout.id), inArray(payouts.status, ["sent", "paid"])))
      .run();
    if (bank.status === "paid")
      db.update(payouts).set({ status: "paid", paidAtMs: nowMs }).where(eq(payouts.id, payout.id)).run();
  }
}
