import { sql } from "drizzle-orm";
import { index, integer, real, sqliteTable, text, uniqueIndex } from "drizzle-orm/sqlite-core";

export const jobs = sqliteTable(
  "jobs",
  {
    id: text("id").primaryKey(),
    kind: text("kind").notNull(),
    /** At most one unfinished job holds a key. */
    uniqueKey: text("unique_key"),
    subject: text("subject"), // id of what it works on, for the pages that show its progress
    payload: text("payload", { mode: "json" }).$type<unknown>().notNull(),
    status: text("status", { enum: ["queued", "running", "done", "dead", "cancelled"] }).notNull(),
    priority: integer("priority").notNull().default(0), // higher first
    runAtMs: integer("run_at_ms").notNull(),
    attempts: integer("attempts").notNull().default(0),
    attemptsMax: integer("attempts_max").notNull().default(8),
    lockedBy: text("locked_by"),
    lockedUntilMs: integer("locked_until_ms"),
    progress: real("progress").notNull().default(0), // 0..1
    progressNote: text("progress_note"),
    lastError: text("last_error"),
    createdAtMs: integer("created_at_ms").notNull(),
    finishedAtMs: integer("finished_at_ms"),
  },
  (t) => [
    index("jobs_due").on(t.status, t.priority, t.runAtMs),
    index("jobs_subject").on(t.subject, t.kind),
    uniqueIndex("jobs_unique")
      .on(t.uniqueKey)
      .where(sql`status in ('queued', 'running')`),
  ],
);

/** Who did what to what. Each row carries the hash of the row before: a removed or changed row shows. */
export const auditLog = sqliteTable(
  "audit_log",
  {
    sequence: integer("sequence").primaryKey({ autoIncrement: true }),
    id: text("id").notNull().unique(),
    actorId: text("actor_id"), // null: the product itself
    action: text("action").notNull(),
    subject: text("subject").notNull(),
    detail: text("detail", { mode: "json" }).$type<Record<string, unknown>>().notNull(),
    atMs: integer("at_ms").notNull(),
    previousHash: text("previous_hash").notNull(),
    hash: text("hash").notNull(),
  },
  (t) => [index("audit_log_subject").on(t.subject)],
);
