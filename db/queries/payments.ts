import { desc, eq } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { payouts, users } from "@/db/schema";

/** An annotator's payouts, latest first. */
export function listPayoutsOf(db: Reader, annotatorId: string, limit = 50) {
  return db
    .select()
    .from(payouts)
    .where(eq(payouts.annotatorId, annotatorId))
    .orderBy(desc(payouts.createdAtMs), desc(payouts.id))
    .limit(limit)
    .all();
}

/** All payouts with names, latest first. */
export function listPayouts(db: Reader, limit: number) {
  return db
    .select({ payout: payouts, name: users.name })
    .from(payouts)
    .innerJoin(users, eq(users.id, payouts.annotatorId))
    .orderBy(desc(payouts.createdAtMs), desc(payouts.id))
    .limit(limit)
    .all();
}
