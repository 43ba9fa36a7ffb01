import { and, asc, eq, gte, inArray, lt, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { batches, images, ledgerEntries, ledgerPostings, submissions, teams, topUps } from "@/db/schema";
import type { AccountId } from "@/lib/ledger/posting";
import type { StatementEntry } from "@/lib/ledger/statement";

/** Balance of accounts together at an instant: the sum of all entries before it. */
export function balanceBefore(db: Reader, accounts: readonly AccountId[], atMs: number): number {
  const row = db
    .select({ cents: sql<number>`coalesce(sum(${ledgerEntries.cents}), 0)` })
    .from(ledgerEntries)
    .where(and(inArray(ledgerEntries.accountId, [...accounts]), lt(ledgerEntries.postedAtMs, atMs)))
    .get();
  return row?.cents ?? 0;
}

/**
 * Entries of accounts in [fromMs, toMs), oldest first, ties in order of posting; entries of one posting are one
 * line, and one that only moves between these accounts is none.
 */
export function listStatementEntries(
  db: Reader,
  accounts: readonly AccountId[],
  { fromMs, toMs }: { fromMs: number; toMs: number },
): StatementEntry[] {
  const cents = sql<number>`sum(${ledgerEntries.cents})`;
  return db
    .select({
      atMs: ledgerPostings.postedAtMs,
      kind: ledgerPostings.kind,
      memo: ledgerPostings.memo,
      cents,
    })
    .from(ledgerEntries)
    .innerJoin(ledgerPostings, eq(ledgerPostings.id, ledgerEntries.postingId))
    .where(
      and(
        inArray(ledgerEntries.accountId, [...accounts]),
        gte(ledgerEntries.postedAtMs, fromMs),
        lt(ledgerEntries.postedAtMs, toMs),
      ),
    )
    .groupBy(ledgerPostings.id)
    .having(sql`${cents} <> 0`)
    .orderBy(asc(ledgerPostings.postedAtMs), asc(sql`min(${ledgerEntries.id})`))
    .all();
}

/** A card payment with the name of its team. */
export function findTopUp(db: Reader, topUpId: string) {
  return db
    .select({ topUp: topUps, teamName: teams.name })
    .from(topUps)
    .innerJoin(teams, eq(teams.id, topUps.teamId))
    .where(eq(topUps.id, topUpId))
    .get();
}

/** What a batch is billed for: its paid submissions in sum, and the images that they are of. */
export function billedWork(db: Reader, batchId: string) {
  const row = db
    .select({
      submissions: sql<number>`count(*)`,
      images: sql<number>`count(distinct ${images.id})`,
      payCents: sql<number>`coalesce(sum(${submissions.payCents}), 0)`,
      feeCents: sql<number>`coalesce(sum(${submissions.feeCents}), 0)`,
      teamName: sql<string>`(select t.name from ${teams} t join ${batches} b on b.team_id = t.id where b.id = ${batchId})`,
    })
    .from(submissions)
    .innerJoin(images, eq(images.id, submissions.imageId))
    .where(and(eq(submissions.batchId, batchId), sql`${submissions.payCents} > 0`))
    .get();
  return row ?? { submissions: 0, images: 0, payCents: 0, feeCents: 0, teamName: "" };
}
