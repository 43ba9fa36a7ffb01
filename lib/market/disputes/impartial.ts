import { and, eq, isNotNull, ne, or } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { findBatch } from "@/db/queries/batches";
import { getTeamRole } from "@/db/queries/people";
import { listSubmissionsOf, type DisputeRow } from "@/db/queries/work";
import { disputes, users } from "@/db/schema";
import { AppError } from "@/lib/errors";

/**
 * Why a person may not decide a dispute, in words for that person; undefined when nothing stands against it.
 * Nobody decides a case in which they took part: as who contests, as who drew the image, as a member of the
 * requester's team, or as who decided, proposed or confirmed on the same thing before.
 */
export function whyPartial(db: Reader, dispute: DisputeRow, userId: string): string | undefined {
  if (dispute.openedBy === userId) return "You opened this dispute; another admin decides it.";
  if (listSubmissionsOf(db, dispute.imageId).some((submission) => submission.annotatorId === userId))
    return "You drew this picture; another admin decides it.";
  const batch = findBatch(db, dispute.batchId);
  if (batch && getTeamRole(db, batch.teamId, userId) !== undefined)
    return "You are a member of the requester's team; another admin decides it.";
  const before = db
    .select({ decidedBy: disputes.decidedBy, confirmedBy: disputes.confirmedBy })
    .from(disputes)
    .where(
      and(
        eq(disputes.status, "decided"),
        ne(disputes.id, dispute.id),
        or(eq(disputes.subject, dispute.subject), eq(disputes.id, dispute.appealOf ?? "")),
      ),
    )
    .all();
  if (before.some((row) => row.decidedBy === userId || row.confirmedBy === userId))
    return "You decided the first instance; another admin decides it now.";
  return undefined;
}

/** Throws unless the person may decide. */
export function requireImpartial(db: Reader, dispute: DisputeRow, userId: string): void {
  const reason = whyPartial(db, dispute, userId);
  if (reason) throw new AppError("forbidden", reason);
}

/** The active admins with a confirmed address who may decide a dispute. */
export function listImpartialAdmins(db: Reader, dispute: DisputeRow) {
  return db
    .select()
    .from(users)
    .where(and(eq(users.role, "admin"), eq(users.status, "active"), isNotNull(users.emailVerifiedAtMs)))
    .all()
    .filter((admin) => whyPartial(db, dispute, admin.id) === undefined);
}
