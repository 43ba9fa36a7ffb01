import { index, integer, sqliteTable, text, uniqueIndex } from "drizzle-orm/sqlite-core";

/** Accounts of the ledger with their balance, which always equals the sum of their entries. */
export const ledgerAccounts = sqliteTable("ledger_accounts", {
  id: text("id").primaryKey(), // kind or kind:owner
  kind: text("kind").notNull(),
  ownerId: text("owner_id"),
  balanceCents: integer("balance_cents").notNull().default(0),
  createdAtMs: integer("created_at_ms").notNull(),
});

/** What moved money, once for each cause. Append-only: a trigger refuses update and delete. */
export const ledgerPostings = sqliteTable(
  "ledger_postings",
  {
    id: text("id").primaryKey(),
    /** What caused it: (source, sourceId, kind) is unique, a repeat is no second posting. */
    source: text("source").notNull(),
    sourceId: text("source_id").notNull(),
    kind: text("kind").notNull(),
    /** SHA-256 of the entries: the same cause with other entries is a conflict. */
    digest: text("digest").notNull(),
    /** The posting that this one corrects or reverses. */
    linkedTo: text("linked_to"),
    memo: text("memo").notNull(),
    postedAtMs: integer("posted_at_ms").notNull(),
  },
  (t) => [
    uniqueIndex("ledger_postings_cause").on(t.source, t.sourceId, t.kind),
    index("ledger_postings_time").on(t.postedAtMs),
  ],
);

export const ledgerEntries = sqliteTable(
  "ledger_entries",
  {
    id: integer("id").primaryKey({ autoIncrement: true }),
    postingId: text("posting_id")
      .notNull()
      .references(() => ledgerPostings.id),
    accountId: text("account_id")
      .notNull()
      .references(() => ledgerAccounts.id),
    cents: integer("cents").notNull(),
    /** The account's balance after this entry. */
    balanceCents: integer("balance_cents").notNull(),
    postedAtMs: integer("posted_at_ms").notNull(),
  },
  (t) => [
    index("ledger_entries_account").on(t.accountId, t.id),
    index("ledger_entries_posting").on(t.postingId),
  ],
);

/** What does not match and wants a person. */
export const ledgerAlerts = sqliteTable("ledger_alerts", {
  id: text("id").primaryKey(),
  what: text("what").notNull(),
  detail: text("detail").notNull(),
  createdAtMs: integer("created_at_ms").notNull(),
  resolvedAtMs: integer("resolved_at_ms"),
});
