import { invariant } from "@/lib/errors";
import { requireCents } from "./amounts";

export type StatementEntry = { atMs: number; kind: string; memo: string; cents: number };

export type StatementLine = StatementEntry & {
  /** After this line. */
  balanceCents: number;
};

/** An account over a time. It adds up by itself: opening + sum of the lines = closing. */
export type Statement = {
  openingCents: number;
  lines: StatementLine[];
  closingCents: number;
  /** Sum of the lines of each kind; together they are closing minus opening. */
  totals: ReadonlyMap<string, number>;
};

/**
 * The statement of an account from its entries in order of time. Throws InvariantError unless it ends at
 * `closingCents`, which is read on its own, so that a missing or doubled line cannot go unseen. O(n).
 */
export function statementOf(
  openingCents: number,
  entries: readonly StatementEntry[],
  closingCents: number,
): Statement {
  let balanceCents = requireCents(openingCents, "the opening balance");
  const totals = new Map<string, number>();
  const lines = entries.map((entry) => {
    balanceCents += requireCents(entry.cents, "a line");
    totals.set(entry.kind, (totals.get(entry.kind) ?? 0) + entry.cents);
    return { ...entry, balanceCents };
  });
  invariant(
    balanceCents === closingCents,
    `a statement ends at ${balanceCents}, the account at ${closingCents}`,
  );
  return { openingCents, lines, closingCents, totals };
}

/** A month or a year in UTC, as [from, to) in epoch milliseconds. RangeError for one that does not exist. */
export function periodOf(year: number, month?: number): { fromMs: number; toMs: number } {
  if (!Number.isInteger(year) || year < 2000 || year > 9999) throw new RangeError(`there is no year ${year}`);
  if (month === undefined) return { fromMs: Date.UTC(year, 0), toMs: Date.UTC(year + 1, 0) };
  if (!Number.isInteger(month) || month < 1 || month > 12) throw new RangeError(`there is no month ${month}`);
  return { fromMs: Date.UTC(year, month - 1), toMs: Date.UTC(year, month) };
}
