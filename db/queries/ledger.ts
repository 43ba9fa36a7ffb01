import { and, asc, desc, eq, gte, inArray, isNull, lt, sql } from "drizzle-orm";
import type { Reader, Tx } from "@/db/client";
import { ledgerAccounts, ledgerAlerts, ledgerEntries, ledgerPostings } from "@/db/schema";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import {
  kindOf,
  NEVER_NEGATIVE,
  NEVER_POSITIVE,
  type AccountId,
  type Entry,
  type Posting,
} from "@/lib/ledger/posting";
import { digestOf } from "./ledgerDigest";

export { ledgerViolations } from "./ledgerChecks";
export { digestOf };

export type PostingRow = typeof ledgerPostings.$inferSelect;

type Cause = { source: string; sourceId: string; kind: string };
type NewPosting = Cause & {
  posting: Posting;
  memo: string;
  nowMs: number;
  linkedTo?: string | null;
  /**
   * Whether a repeat asks for what was posted first, for postings whose entries depend on balances that have
   * moved on since (a debt repaid out of a pay). Without it the entries must be the same.
   */
  isRepeatOf?: (first: readonly Entry[]) => boolean;
};

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

/** What was posted first about something, of whatever kind; postings are only ever added, so their order is time's. */
export function findFirstPosting(
  db: Reader,
  { source, sourceId }: Pick<Cause, "source" | "sourceId">,
): PostingRow | undefined {
  return db
    .select()
    .from(ledgerPostings)
    .where(and(eq(ledgerPostings.source, source), eq(ledgerPostings.sourceId, sourceId)))
    .orderBy(sql`rowid`)
    .limit(1)
    .get();
}

/** The entries of a posting, sorted by account as `posting()` sorts them. */
export function entriesOf(db: Reader, postingId: string): Entry[] {
  return db
    .select({ accountId: ledgerEntries.accountId, cents: ledgerEntries.cents })
    .from(ledgerEntries)
    .where(eq(ledgerEntries.postingId, postingId))
    .orderBy(asc(ledgerEntries.id))
    .all()
    .map((entry) => ({ accountId: entry.accountId as AccountId, cents: entry.cents }));
}

/**
 * Writes a posting once for each cause: a repeat returns the first row and moves nothing, the same cause
 * with other entries is a conflict. An account that may not be negative refuses with a conflict. Balances
 * move in the same transaction.
 */
export function insertPosting(
  tx: Tx,
  { posting, memo, nowMs, linkedTo, isRepeatOf, ...cause }: NewPosting,
): PostingRow {
  const digest = digestOf(posting);
  const first = findPosting(tx, cause);
  if (first) {
    const isRepeat = first.digest === digest || isRepeatOf?.(entriesOf(tx, first.id)) === true;
    if (!isRepeat) throw new AppError("conflict", "This was posted already with another amount.");
    return first;
  }
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
    invariant(
      balanceCents <= 0 || !NEVER_POSITIVE.includes(kind),
      `${accountId} would hold ${balanceCents} cents, and may only be owed`,
    );
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

/** Takes an alert off the page: a person has looked at it. False when it was off already. */
export function resolveAlert(tx: Reader, alertId: string, nowMs: number): boolean {
  return (
    tx
      .update(ledgerAlerts)
      .set({ resolvedAtMs: nowMs })
      .where(and(eq(ledgerAlerts.id, alertId), isNull(ledgerAlerts.resolvedAtMs)))
      .run().changes === 1
  );
}

/** The posting of a Stripe balance transaction that stands: one in suspense and taken out again does not. */
export function findStripePosting(db: Reader, transactionId: string): PostingRow | undefined {
  const rows = db
    .select()
    .from(ledgerPostings)
    .where(and(eq(ledgerPostings.source, "stripe"), eq(ledgerPostings.sourceId, transactionId)))
    .all();
  const isCleared = rows.some((row) => row.kind === "suspense-cleared");
  return rows.find(
    (row) =>
      row.kind !== "available" && row.kind !== "suspense-cleared" && !(row.kind === "suspense" && isCleared),
  );
}
