import { desc, eq, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { payouts, refunds, topUps, users } from "@/db/schema";

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

/**
 * Ids of Stripe's balance transactions that were booked as pending there and have not been moved to available,
 * oldest first.
 */
export function listPendingStripePostings(db: Reader): string[] {
  return db
    .all<{ source_id: string }>(
      sql`select p.source_id from ledger_entries e join ledger_postings p on p.id = e.posting_id
        where e.account_id = 'stripe:pending' and p.source = 'stripe' group by p.source_id having sum(e.cents) <> 0 order by min(e.id)`,
    )
    .map((row) => row.source_id);
}

/** A team's card payments, latest first. */
export function listTopUpsOf(db: Reader, teamId: string, limit = 50) {
  return db
    .select()
    .from(topUps)
    .where(eq(topUps.teamId, teamId))
    .orderBy(desc(topUps.createdAtMs), desc(topUps.id))
    .limit(limit)
    .all();
}

/** A team's refunds, latest first. */
export function listRefundsOf(db: Reader, teamId: string, limit = 50) {
  return db
    .select()
    .from(refunds)
    .where(eq(refunds.teamId, teamId))
    .orderBy(desc(refunds.createdAtMs), desc(refunds.id))
    .limit(limit)
    .all();
}
