import { eq } from "drizzle-orm";
import { getDb } from "@/db/client";
import { findUser } from "@/db/queries/people";
import { users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { env } from "@/lib/env";
import { invariant } from "@/lib/errors";
import { stripe } from "@/lib/services/stripeClient";

type By = { actor: Actor; nowMs: number };

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
  return refreshAccount(user.stripeAccountId);
}

/** Notes whether an account can be paid now. Returns it. */
export async function refreshAccount(stripeAccountId: string): Promise<boolean> {
  const account = await stripe().accounts.retrieve(stripeAccountId);
  const isReady = account.payouts_enabled === true && account.capabilities?.transfers === "active";
  getDb()
    .update(users)
    .set({ payoutsEnabled: isReady })
    .where(eq(users.stripeAccountId, stripeAccountId))
    .run();
  return isReady;
}
