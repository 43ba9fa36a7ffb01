import { desc, eq } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { auditLog, jobs, users } from "@/db/schema";

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
