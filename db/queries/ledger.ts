import { createHash } from "node:crypto";
import { and, asc, desc, eq, gte, inArray, isNull, like, lt, sql } from "drizzle-orm";
import type { Reader, Tx } from "@/db/client";
import { ledgerAccounts, ledgerAlerts, ledgerEntries, ledgerPostings } from "@/db/schema";
import { AppError } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { kindOf, NEVER_NEGATIVE, type AccountId, type Posting } from "@/lib/ledger/posting";

export type PostingRow = typeof ledgerPostings.$inferSelect;

type Cause = { source: string; sourceId: string; kind: string };
type NewPosting = Cause & { posting: Posting; memo: string; nowMs: number; linkedTo?: string | null };

/** SHA-256 of a posting's entries, hex. */
export function digestOf(posting: Posting): string {
  return createHash("sha256")
    .update(JSON.stringify(posting.map((e) => [e.accountId, e.cents])))
    .digest("hex");
}

export function findPosting(db: Reader, { source, sourceId, kind }: Cause): PostingRow | undefined {
  return db
    .select()
    .from(ledgerPostings)
    .where(
      and(
        eq(ledgerPostings.source, source),
        eq(ledgerPostings.sourceId, sourceId),
        eq(ledgerPostings.kind, kind),
      ),
    )
    .get();
}

/**
 * Writes a posting once for each cause: a repeat returns the first row and moves nothing, the same cause
 * with other entries is a conflict. An account that may not be negative refuses with a conflict. Balances
 * move in the same transaction.
 */
export function insertPosting(tx: Tx, { posting, memo, nowMs, linkedTo, ...cause }: NewPosting): PostingRow {
  const digest = digestOf(posting);
  const first = findPosting(tx, cause);
  if (first && first.digest !== digest)
    throw new AppError("conflict", "This was posted already with another amount.");
  if (first) return first;
  const row = tx
    .insert(ledgerPostings)
    .values({ id: newId("pst"), ...cause, digest, memo, postedAtMs: nowMs, linkedTo: linkedTo ?? null })
    .returning()
    .get();
  for (const { accountId, cents } of posting) {
    const ownerId = accountId.includes(":") ? accountId.slice(accountId.indexOf(":") + 1) : null;
    const kind = kindOf(accountId);
    tx.insert(ledgerAccounts)
      .values({ id: accountId, kind, ownerId, createdAtMs: nowMs })
      .onConflictDoNothing()
      .run();
    const { balanceCents } = tx
      .update(ledgerAccounts)
      .set({ balanceCents: sql`${ledgerAccounts.balanceCents} + ${cents}` })
      .where(eq(ledgerAccounts.id, accountId))
      .returning({ balanceCents: ledgerAccounts.balanceCents })
      .get();
    if (cents < 0 && balanceCents < 0 && NEVER_NEGATIVE.includes(kind)) {
      throw new AppError("conflict", `There is not enough money in the ${kind}.`);
    }
    tx.insert(ledgerEntries)
      .values({ postingId: row.id, accountId, cents, balanceCents, postedAtMs: nowMs })
      .run();
  }
  return row;
}

/** Balance in cents; 0 for an account that was never used. */
export function balanceOf(db: Reader, accountId: AccountId): number {
  return (
    db
      .select({ cents: ledgerAccounts.balanceCents })
      .from(ledgerAccounts)
      .where(eq(ledgerAccounts.id, accountId))
      .get()?.cents ?? 0
  );
}

export type Movement = {
  entryId: number;
  memo: string;
  kind: string;
  source: string;
  sourceId: string;
  cents: number;
  balanceCents: number;
  postedAtMs: number;
};

/** Entries of an account, latest first, before entry `beforeId`. */
export function listMovements(
  db: Reader,
  accountId: AccountId,
  { limit, beforeId }: { limit: number; beforeId?: number },
): Movement[] {
  return db
    .select({
      entryId: ledgerEntries.id,
      memo: ledgerPostings.memo,
      kind: ledgerPostings.kind,
      source: ledgerPostings.source,
      sourceId: ledgerPostings.sourceId,
      cents: ledgerEntries.cents,
      balanceCents: ledgerEntries.balanceCents,
      postedAtMs: ledgerEntries.postedAtMs,
    })
    .from(ledgerEntries)
    .innerJoin(ledgerPostings, eq(ledgerPostings.id, ledgerEntries.postingId))
    .where(and(eq(ledgerEntries.accountId, accountId), beforeId ? lt(ledgerEntries.id, beforeId) : undefined))
    .orderBy(desc(ledgerEntries.id))
    .limit(limit)
    .all();
}

/** Sum of an account's entries by kind of posting, since a time. */
export function sumByKind(db: Reader, accountId: AccountId, sinceMs = 0): Map<string, number> {
  const rows = db
    .select({ kind: ledgerPostings.kind, cents: sql<number>`sum(${ledgerEntries.cents})` })
    .from(ledgerEntries)
    .innerJoin(ledgerPostings, eq(ledgerPostings.id, ledgerEntries.postingId))
    .where(and(eq(ledgerEntries.accountId, accountId), gte(ledgerEntries.postedAtMs, sinceMs)))
    .groupBy(ledgerPostings.kind)
    .all();
  return new Map(rows.map((row) => [row.kind, row.cents]));
}

/** The balance of each kind of account, and how many accounts; the whole sums to zero. */
export function trialBalance(db: Reader): { kind: string; accounts: number; cents: number }[] {
  return db
    .select({
      kind: ledgerAccounts.kind,
      accounts: sql<number>`count(*)`,
      cents: sql<number>`sum(${ledgerAccounts.balanceCents})`,
    })
    .from(ledgerAccounts)
    .groupBy(ledgerAccounts.kind)
    .orderBy(asc(ledgerAccounts.kind))
    .all();
}

/** The latest postings with their entries. */
export function listPostings(db: Reader, limit: number) {
  const postings = db
    .select()
    .from(ledgerPostings)
    .orderBy(desc(ledgerPostings.postedAtMs), desc(ledgerPostings.id))
    .limit(limit)
    .all();
  if (postings.length === 0) return [];
  const entries = db
    .select()
    .from(ledgerEntries)
    .where(
      inArray(
        ledgerEntries.postingId,
        postings.map((row) => row.id),
      ),
    )
    .orderBy(asc(ledgerEntries.id))
    .all();
  return postings.map((row) => ({ ...row, entries: entries.filter((entry) => entry.postingId === row.id) }));
}

/** Sums over the escrow accounts of batches, for the check that what went in came out or is there. */
export function listAccounts(db: Reader, kind: string) {
  return db
    .select()
    .from(ledgerAccounts)
    .where(like(ledgerAccounts.id, `${kind}%`))
    .orderBy(asc(ledgerAccounts.id))
    .all();
}

export function listOpenAlerts(db: Reader) {
  return db
    .select()
    .from(ledgerAlerts)
    .where(isNull(ledgerAlerts.resolvedAtMs))
    .orderBy(desc(ledgerAlerts.createdAtMs))
    .all();
}

/** Raises an alert for a person, unless the same one is open. */
export function raiseAlert(
  tx: Reader,
  { what, detail, nowMs }: { what: string; detail: string; nowMs: number },
): void {
  const open = tx
    .select({ id: ledgerAlerts.id })
    .from(ledgerAlerts)
    .where(
      and(eq(ledgerAlerts.what, what), eq(ledgerAlerts.detail, detail), isNull(ledgerAlerts.resolvedAtMs)),
    )
    .get();
  if (!open)
    tx.insert(ledgerAlerts)
      .values({ id: newId("aud"), what, detail, createdAtMs: nowMs })
      .run();
}

/** What in the ledger does not hold; empty when all does. O(entries). */
export function ledgerViolations(db: Reader): string[] {
  const unbalanced = db.all<{ posting_id: string; sum: number }>(
    sql`select posting_id, sum(cents) as sum from ${ledgerEntries} group by posting_id having sum(cents) <> 0`,
  );
  const drifted = db.all<{ id: string; balance_cents: number; total: number }>(
    sql`select a.id, a.balance_cents, coalesce((select sum(e.cents) from ledger_entries e where e.account_id = a.id), 0) as total from ${ledgerAccounts} a where a.balance_cents <> total`,
  );
  const negative = db
    .select()
    .from(ledgerAccounts)
    .where(and(inArray(ledgerAccounts.kind, [...NEVER_NEGATIVE]), lt(ledgerAccounts.balanceCents, 0)))
    .all();
  const positiveDebt = db
    .select()
    .from(ledgerAccounts)
    .where(and(eq(ledgerAccounts.kind, "debt"), sql`${ledgerAccounts.balanceCents} > 0`))
    .all();
  const unlinked = db.all<{ id: string }>(
    sql`select p.id from ledger_postings p where p.linked_to is not null and not exists (select 1 from ledger_postings q where q.id = p.linked_to)`,
  );
  const total =
    db.get<{ sum: number | null }>(sql`select sum(balance_cents) as sum from ${ledgerAccounts}`)?.sum ?? 0;
  return [
    ...unbalanced.map((row) => `posting ${row.posting_id} sums to ${row.sum}`),
    ...drifted.map((row) => `account ${row.id} says ${row.balance_cents}, its entries ${row.total}`),
    ...negative.map((row) => `account ${row.id} is negative: ${row.balanceCents}`),
    ...positiveDebt.map((row) => `account ${row.id} owes a negative debt: ${row.balanceCents}`),
    ...unlinked.map((row) => `posting ${row.id} is linked to one that is not there`),
    ...(total === 0 ? [] : [`the trial balance is ${total}, not zero`]),
  ];
}
