import { and, asc, desc, eq, gte, inArray, lte, lt, sql } from "drizzle-orm";
import type { Db, Reader, Tx } from "@/db/client";
import { inTransaction } from "@/db/client";
import { jobs } from "@/db/schema";
import { newId } from "@/lib/ids";
import type { JobKind, JobPayloads } from "./kinds";

export type JobRow = typeof jobs.$inferSelect;

type Enqueue<K extends JobKind> = {
  kind: K;
  payload: JobPayloads[K];
  nowMs: number;
  /** While an unfinished job holds the key, a second one is not made. */
  uniqueKey?: string;
  subject?: string;
  priority?: number;
  delayMs?: number;
  attemptsMax?: number;
};

/**
 * Puts a job in the queue inside the caller's transaction: it exists exactly when what caused it does
 * (outbox). Returns the id, or null when an unfinished job holds the unique key.
 */
export function enqueue<K extends JobKind>(tx: Reader, job: Enqueue<K>): string | null {
  const id = newId("job");
  const inserted = tx
    .insert(jobs)
    .values({
      id,
      kind: job.kind,
      uniqueKey: job.uniqueKey ?? null,
      subject: job.subject ?? null,
      payload: job.payload,
      status: "queued",
      priority: job.priority ?? 0,
      runAtMs: job.nowMs + (job.delayMs ?? 0),
      attemptsMax: job.attemptsMax ?? 8,
      createdAtMs: job.nowMs,
    })
    .onConflictDoNothing()
    .run();
  return inserted.changes === 1 ? id : null;
}

const LEASE_MS = 60_000;

/**
 * Takes the most urgent due job, or undefined. A running job whose lease ran out (its worker died) is due
 * again, unless it has had its attempts: a job that kills its worker each time ends among the dead. Order:
 * priority, then due time, then id.
 */
export function takeJob(db: Db, workerId: string, nowMs: number): JobRow | undefined {
  return inTransaction(db, (tx) => {
    const lapsed = and(eq(jobs.status, "running"), lt(jobs.lockedUntilMs, nowMs));
    const free = { lockedBy: null, lockedUntilMs: null };
    tx.update(jobs)
      .set({ ...free, status: "dead", finishedAtMs: nowMs, lastError: "Its worker died each time." })
      .where(and(lapsed, gte(jobs.attempts, jobs.attemptsMax)))
      .run();
    tx.update(jobs)
      .set({ ...free, status: "queued" })
      .where(lapsed)
      .run();
    const due = tx
      .select()
      .from(jobs)
      .where(and(eq(jobs.status, "queued"), lte(jobs.runAtMs, nowMs)))
      .orderBy(desc(jobs.priority), asc(jobs.runAtMs), asc(jobs.id))
      .limit(1)
      .get();
    if (!due) return undefined;
    return tx
      .update(jobs)
      .set({
        status: "running",
        attempts: due.attempts + 1,
        lockedBy: workerId,
        lockedUntilMs: nowMs + LEASE_MS,
      })
      .where(eq(jobs.id, due.id))
      .returning()
      .get();
  });
}

/** Extends the lease and says how far the job is, 0..1. False when the job is no longer this worker's. */
export function reportProgress(
  db: Db,
  job: JobRow,
  progress: number,
  note: string | null,
  nowMs: number,
): boolean {
  const changed = db
    .update(jobs)
    .set({ progress, progressNote: note, lockedUntilMs: nowMs + LEASE_MS })
    .where(isHeld(job))
    .run();
  return changed.changes === 1;
}

/** Whether the row is still the job as this worker took it: after a lost lease it is another's. */
function isHeld(job: JobRow) {
  return and(eq(jobs.id, job.id), eq(jobs.status, "running"), eq(jobs.lockedBy, job.lockedBy ?? ""));
}

/** Marks the job done, if it is still this worker's. Runs in the handler's own transaction where it has one. */
export function finishJob(tx: Db | Tx, job: JobRow, nowMs: number): void {
  tx.update(jobs)
    .set({
      status: "done",
      progress: 1,
      finishedAtMs: nowMs,
      lockedBy: null,
      lockedUntilMs: null,
      lastError: null,
    })
    .where(isHeld(job))
    .run();
}

/**
 * Wait before attempt n + 1: 1 s, 2 s, 4 s ... to 5 min, with up to a quarter more as jitter, taken from
 * the job's id so that the same history gives the same waits.
 */
export function backOffMs(jobId: string, attempts: number): number {
  const base = Math.min(1000 * 2 ** (attempts - 1), 300_000);
  let hash = attempts;
  for (const letter of jobId) hash = (hash * 31 + letter.charCodeAt(0)) >>> 0;
  return base + Math.floor((base / 4) * ((hash % 1000) / 1000));
}

/** Puts this worker's job back for a later attempt, or among the dead when it has had its attempts. */
export function failJob(db: Db, job: JobRow, error: unknown, nowMs: number, retry = true): void {
  const message = error instanceof Error ? error.message : String(error);
  const dead = !retry || job.attempts >= job.attemptsMax;
  db.update(jobs)
    .set({
      status: dead ? "dead" : "queued",
      runAtMs: dead ? job.runAtMs : nowMs + backOffMs(job.id, job.attempts),
      lastError: message.slice(0, 2000),
      lockedBy: null,
      lockedUntilMs: null,
      finishedAtMs: dead ? nowMs : null,
    })
    .where(isHeld(job))
    .run();
}

/** Gives a dead job another set of attempts; false if it is not dead, or a newer job holds its key. */
export function reviveJob(db: Db, jobId: string, nowMs: number): boolean {
  const changed = db
    .update(jobs)
    .set({ status: "queued", attempts: 0, runAtMs: nowMs, finishedAtMs: null })
    .where(
      and(
        eq(jobs.id, jobId),
        eq(jobs.status, "dead"),
        sql`not exists (select 1 from jobs other where other.unique_key = ${jobs.uniqueKey} and other.status in ('queued', 'running'))`,
      ),
    )
    .run();
  return changed.changes === 1;
}

/** Unfinished jobs of a subject, for the pages that show progress. */
export function listUnfinishedJobs(db: Reader, subject: string): JobRow[] {
  return db
    .select()
    .from(jobs)
    .where(and(eq(jobs.subject, subject), inArray(jobs.status, ["queued", "running"])))
    .orderBy(asc(jobs.createdAtMs), asc(jobs.id))
    .limit(500)
    .all();
}

/** Count by status and kind, and the dead ones, for the admin's jobs page. */
export function jobCounts(db: Reader): { kind: string; status: string; count: number }[] {
  return db
    .select({ kind: jobs.kind, status: jobs.status, count: sql<number>`count(*)` })
    .from(jobs)
    .groupBy(jobs.kind, jobs.status)
    .orderBy(jobs.kind, jobs.status)
    .all();
}
