import { and, desc, eq, inArray, lt, sql, type SQL } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { auditLog, images, jobs, releases, users } from "@/db/schema";

/** Jobs in one state, latest first. */
export function listRecentJobs(db: Reader, status: (typeof jobs.$inferSelect)["status"], limit: number) {
  return db
    .select()
    .from(jobs)
    .where(eq(jobs.status, status))
    .orderBy(desc(jobs.createdAtMs), desc(jobs.id))
    .limit(limit)
    .all();
}

const SWEEPS_KEPT_MS = 60_000;

/** Forgets finished sweeps of claims but the last minute's: thousands of them would hide the work of people. */
export function forgetOldSweeps(db: Reader, nowMs: number): void {
  db.delete(jobs)
    .where(
      and(
        inArray(jobs.kind, ["claims.sweep", "payouts.schedule", "consensus.overdue"]),
        eq(jobs.status, "done"),
        lt(jobs.finishedAtMs, nowMs - SWEEPS_KEPT_MS),
      ),
    )
    .run();
}

/** The audit log, latest first, with who did it. */
export function listAudit(db: Reader, limit: number) {
  return db
    .select({ entry: auditLog, actorName: users.name })
    .from(auditLog)
    .leftJoin(users, eq(users.id, auditLog.actorId))
    .orderBy(desc(auditLog.sequence))
    .limit(limit)
    .all();
}

/**
 * Tells what waits for a job that is dead: its image is refused or has no proposals, its release has failed,
 * so that the pages say so and a person can try again. Changes only what still waits. Returns how many.
 */
export function noteDeadJobs(db: Reader): number {
  const died = (kind: string, field: string, id: SQL) =>
    sql`exists (select 1 from jobs j where j.kind = ${kind} and j.status = 'dead' and json_extract(j.payload, ${`$.${field}`}) = ${id})
      and not exists (select 1 from jobs j where j.kind = ${kind} and j.status in ('queued', 'running') and json_extract(j.payload, ${`$.${field}`}) = ${id})`;
  const proposals = db
    .update(images)
    .set({ proposalState: "failed" })
    .where(and(eq(images.proposalState, "queued"), died("image.propose", "imageId", sql`${images.id}`)))
    .run();
  const checks = db
    .update(images)
    .set({ status: "refused", refusal: "The picture could not be checked. Upload it again." })
    .where(and(eq(images.status, "checking"), died("image.check", "imageId", sql`${images.id}`)))
    .run();
  const builds = db
    .update(releases)
    .set({ status: "failed", failure: "the build broke off" })
    .where(and(eq(releases.status, "building"), died("release.build", "releaseId", sql`${releases.id}`)))
    .run();
  return proposals.changes + checks.changes + builds.changes;
}
