import { and, eq, isNull } from "drizzle-orm";
import type Stripe from "stripe";
import { getDb, inTransaction } from "@/db/client";
import { stripeEvents } from "@/db/schema";
import { env } from "@/lib/env";
import { AppError } from "@/lib/errors";
import { enqueue } from "@/lib/jobs/queue";
import { stripe } from "@/lib/services/stripeClient";
import { settleCardDispute } from "./cardDisputes";
import { settleCharge, settleCheckout } from "./checkout";
import { refreshAccount } from "./onboarding";
import { settlePayout, settleReversals } from "./payouts";
import { settleRefund } from "./refunds";

/** Stripe sends nothing again that was answered, so the attempts outlast a day on which it cannot be asked. */
const ATTEMPTS_MAX = 320;

type Delivery = { body: string; signature: string | null; nowMs: number };

/**
 * Takes one delivery of the webhook: verifies the signature over the raw body, keeps the event once and
 * queues it, all before answering. A forged one is refused and changes nothing; a duplicate is answered
 * as the first was.
 */
export function receiveStripeEvent({ body, signature, nowMs }: Delivery): void {
  let event: Stripe.Event;
  try {
    event = stripe().webhooks.constructEvent(
      body,
      signature ?? "",
      env().STRIPE_WEBHOOK_SECRET,
      undefined,
      undefined,
      nowMs,
    );
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
        payload: { data: { object: { id: subjectOf(event) } } },
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
      attemptsMax: ATTEMPTS_MAX,
    });
  });
}

function subjectOf({ data: { object } }: Stripe.Event): string {
  return "id" in object && typeof object.id === "string" ? object.id : "";
}

/**
 * Acts on one kept event. Events come late, twice and out of order, so only the object's id is taken from it:
 * the object is fetched again and its present state decides; every posting is keyed by its cause.
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
  const act = actionFor(event.type, event.account);
  if (act) await act(event.payload.data.object.id, nowMs);
  db.update(stripeEvents)
    .set({ processedAtMs: nowMs })
    .where(and(eq(stripeEvents.id, eventId), isNull(stripeEvents.processedAtMs)))
    .run();
}

type Action = (objectId: string, nowMs: number) => Promise<unknown>;

/** What an event sets off; undefined for the many that need nothing. */
function actionFor(type: string, account: string | null): Action | undefined {
  if (type.startsWith("payout."))
    return account === null ? undefined : (id, nowMs) => settlePayout(id, account, nowMs);
  if (type === "account.updated") return refreshAccount;
  if (account !== null) return undefined; // what else happens on a connected account is not the platform's money
  if (type.startsWith("checkout.session.")) return settleCheckout;
  if (type === "charge.succeeded") return settleCharge;
  if (type.startsWith("charge.dispute.")) return settleCardDispute;
  if (type.startsWith("refund.")) return settleRefund;
  if (type === "transfer.reversed") return settleReversals;
  return undefined;
}
