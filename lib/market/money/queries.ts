import { and, eq, inArray, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { balanceOf, listMovements, sumByKind } from "@/db/queries/ledger";
import { ledgerEntries, submissions } from "@/db/schema";
import { accountId } from "@/lib/ledger/posting";

/** What a team's wallet holds, and its latest movements. */
export function walletSummary(
  db: Reader,
  teamId: string,
  { limit = 50, beforeId }: { limit?: number; beforeId?: number } = {},
) {
  const id = accountId("wallet", teamId);
  return {
    balanceCents: balanceOf(db, id),
    movements: listMovements(db, id, { limit, ...(beforeId && { beforeId }) }),
  };
}

/**
 * A batch's money in cents: funded = released + fees + returned + remaining, at every moment. What decisions
 * corrected after the batch was closed went through the team's wallet and counts as less or more returned.
 */
export function batchMoney(db: Reader, batchId: string) {
  const escrow = accountId("escrow", batchId);
  const fundedCents = sumByKind(db, escrow).get("fund") ?? 0;
  const remainingCents = balanceOf(db, escrow);
  const { releasedCents, feeCents } = billOf(db, batchId);
  const returnedCents = fundedCents - remainingCents - releasedCents - feeCents;
  return { fundedCents, returnedCents, remainingCents, releasedCents, feeCents };
}

/** Pay and fees of the batch's settled submissions, corrections included. */
function billOf(db: Reader, batchId: string): { releasedCents: number; feeCents: number } {
  const { payCents, feeCents } = submissions;
  const row = db
    .select({
      releasedCents: sql<number>`coalesce(sum(${payCents}), 0)`,
      feeCents: sql<number>`coalesce(sum(${feeCents}), 0)`,
    })
    .from(submissions)
    .where(eq(submissions.batchId, batchId))
    .get();
  return row ?? { releasedCents: 0, feeCents: 0 };
}

/** What an annotator has earned, may ask for, has on the way, and owes. */
export function earnings(
  db: Reader,
  annotatorId: string,
  { limit = 50, beforeId }: { limit?: number; beforeId?: number } = {},
) {
  const payable = accountId("payable", annotatorId);
  const debt = accountId("debt", annotatorId);
  // Pay that settled a debt was earned as well, so both accounts count.
  const months = db
    .select({
      month: sql<string>`strftime('%Y-%m', ${ledgerEntries.postedAtMs} / 1000, 'unixepoch')`,
      cents: sql<number>`sum(${ledgerEntries.cents})`,
    })
    .from(ledgerEntries)
    .where(
      and(
        inArray(ledgerEntries.accountId, [payable, debt]),
        sql`exists (select 1 from ledger_postings p where p.id = ${ledgerEntries.postingId} and p.source = 'submission')`,
      ),
    )
    .groupBy(sql`1`)
    .orderBy(sql`1 desc`)
    .all();
  return {
    payableCents: balanceOf(db, payable),
    transitCents: balanceOf(db, accountId("transit", annotatorId)),
    debtCents: 0 - balanceOf(db, debt), // never "-0"
    earnedCents: months.reduce((sum, row) => sum + row.cents, 0),
    months,
    movements: listMovements(db, payable, { limit, ...(beforeId && { beforeId }) }),
  };
}
