import { eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { topUps } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { env } from "@/lib/env";
import { AppError } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { CURRENCY } from "@/lib/ledger/amounts";
import { requireTeam } from "@/lib/market/access";
import { stripe } from "@/lib/services/stripeClient";

type Input = { actor: Actor; nowMs: number; teamId: string; amountCents: number; returnPath: string };

export const TOP_UP_MIN_CENTS = 50;
export const TOP_UP_MAX_CENTS = 5_000_000;

/**
 * Begins a card payment into a team's wallet: the row first, then a Checkout Session under the row's own
 * idempotency key. The wallet is credited by the signed webhook, never by the browser coming back.
 */
export async function startTopUp({
  actor,
  nowMs,
  teamId,
  amountCents,
  returnPath,
}: Input): Promise<{ url: string }> {
  if (!Number.isInteger(amountCents) || amountCents < TOP_UP_MIN_CENTS || amountCents > TOP_UP_MAX_CENTS) {
    throw new AppError("invalid", "The amount must be between $0.50 and $50,000.", {
      amountCents: "Between $0.50 and $50,000.",
    });
  }
  const id = newId("pay");
  inTransaction(getDb(), (tx) => {
    requireTeam(tx, teamId, actor, "editor");
    tx.insert(topUps)
      .values({ id, teamId, createdBy: actor.id, amountCents, status: "open", createdAtMs: nowMs })
      .run();
  });
  const back = new URL(returnPath, env().APP_URL);
  if (back.origin !== new URL(env().APP_URL).origin)
    throw new AppError("invalid", "The way back is not ours.");
  const withResult = (result: string) => {
    const url = new URL(back);
    url.searchParams.set("payment", result);
    return url.href;
  };
  const session = await stripe().checkout.sessions.create(
    {
      mode: "payment",
      client_reference_id: id,
      line_items: [
        {
          quantity: 1,
          price_data: {
            currency: CURRENCY,
            unit_amount: amountCents,
            product_data: { name: "Merestone wallet" },
          },
        },
      ],
      metadata: { topUpId: id, teamId },
      payment_intent_data: { metadata: { topUpId: id, teamId } },
      success_url: withResult("done"),
      cancel_url: withResult("cancelled"),
    },
    { idempotencyKey: `checkout:${id}` },
  );
  getDb().update(topUps).set({ stripeSessionId: session.id }).where(eq(topUps.id, id)).run();
  if (!session.url) throw new AppError("upstream", "The payment page did not open. Nothing was charged.");
  return { url: session.url };
}
