import { and, eq, sql } from "drizzle-orm";
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

/** A batch's money: funded = released + fees + returned + remaining. */
export function batchMoney(db: Reader, batchId: string) {
  const escrow = accountId("escrow", batchId);
  const sums = sumByKind(db, escrow);
  const fundedCents = sums.get("fund") ?? 0;
  const returnedCents = -(sums.get("close") ?? 0);
  const remainingCents = balanceOf(db, escrow);
  const spentCents = fundedCents - returnedCents - remainingCents;
  const feeCents = feesOf(db, batchId);
  return { fundedCents, returnedCents, remainingCents, releasedCents: spentCents - feeCents, feeCents };
}

/** Fees of the batch's settled submissions, corrections included. */
function feesOf(db: Reader, batchId: string): number {
  const row = db
    .select({ cents: sql<number>`coalesce(sum(${submissions.feeCents}), 0)` })
    .from(submissions)
    .where(eq(submissions.batchId, batchId))
    .get();
  return row?.cents ?? 0;
}

/** What an annotator has earned, may ask for, has on the way, and owes. */
export function earnings(
  db: Reader,
  annotatorId: string,
  { limit = 50, beforeId }: { limit?: number; beforeId?: number } = {},
) {
  const payable = accountId("payable", annotatorId);
  const months = db
    .select({
      month: sql<string>`strftime('%Y-%m', ${ledgerEntries.postedAtMs} / 1000, 'unixepoch')`,
      cents: sql<number>`sum(${ledgerEntries.cents})`,
    })
    .from(ledgerEntries)
    .where(
      and(
        eq(ledgerEntries.accountId, payable),
        sql`exists (select 1 from ledger_postings p where p.id = ${ledgerEntries.postingId} and p.source = 'submission')`,
      ),
    )
    .groupBy(sql`1`)
    .orderBy(sql`1 desc`)
    .all();
  return {
    payableCents: balanceOf(db, payable),
    transitCents: balanceOf(db, accountId("transit", annotatorId)),
    debtCents: -balanceOf(db, accountId("debt", annotatorId)),
    earnedCents: months.reduce((sum, row) => sum + row.cents, 0),
    months,
    movements: listMovements(db, payable, { limit, ...(beforeId && { beforeId }) }),
  };
}
