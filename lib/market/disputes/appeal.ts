import { and, eq, ne } from "drizzle-orm";
import { getDb, inTransaction, type Reader } from "@/db/client";
import { findBatch, findImage } from "@/db/queries/batches";
import { findDispute, type DisputeRow } from "@/db/queries/work";
import { disputes } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { insertDispute } from "./openDispute";
import { isParty } from "./parties";
import { noteStep } from "./steps";

type Appeal = { actor: Actor; nowMs: number; disputeId: string; reason: string };

/** The last moment at which a decision can be appealed, UTC ms; null while there is none, or when it is final. */
export function appealClosesAtMs(db: Reader, dispute: DisputeRow): number | null {
  if (dispute.status !== "decided" || dispute.decidedAtMs === null || dispute.appealOf) return null;
  const windowHours = findBatch(db, dispute.batchId)?.disputeWindowHours ?? 0;
  return dispute.decidedAtMs + windowHours * 3_600_000;
}

/** The appeal of a decision that waits or was decided; one that was taken back counts as none. */
export function findAppealOf(db: Reader, disputeId: string): DisputeRow | undefined {
  return db
    .select()
    .from(disputes)
    .where(and(eq(disputes.appealOf, disputeId), ne(disputes.status, "withdrawn")))
    .get();
}

/** Whether this person can appeal this decision now. */
export function mayAppeal(db: Reader, dispute: DisputeRow, userId: string, nowMs: number): boolean {
  const closesAtMs = appealClosesAtMs(db, dispute);
  return (
    closesAtMs !== null &&
    nowMs <= closesAtMs &&
    isParty(db, dispute, userId) &&
    findAppealOf(db, dispute.id) === undefined
  );
}

/**
 * Either side appeals a decision, once and within the window. The appeal is a dispute of its own with its own
 * frozen evidence; an admin decides it who had no part in the first decision. What that one says is final here.
 */
export function appealDecision({ actor, nowMs, disputeId, reason }: Appeal): string {
  return inTransaction(getDb(), (tx) => {
    const first = findDispute(tx, disputeId);
    if (!first || !isParty(tx, first, actor.id)) throw new AppError("not_found", "There is no such dispute.");
    if (first.status !== "decided") throw new AppError("conflict", "There is no decision to appeal yet.");
    if (first.appealOf)
      throw new AppError("conflict", "This was decided on appeal; that decision is final here.");
    if (findAppealOf(tx, first.id)) throw new AppError("conflict", "This decision is appealed already.");
    const batch = findBatch(tx, first.batchId);
    const image = findImage(tx, first.imageId);
    invariant(batch && image, "a dispute has a batch and an image");
    const closesAtMs = appealClosesAtMs(tx, first) ?? 0;
    if (nowMs > closesAtMs)
      throw new AppError("conflict", `The ${batch.disputeWindowHours} hours for an appeal are over.`);
    const id = insertDispute(tx, {
      batch,
      image,
      kind: first.kind,
      about: { errorKind: first.errorKind, classId: first.classId },
      appealOf: first.id,
      runId: image.currentRunId,
      submissionId: first.submissionId,
      openedBy: actor.id,
      reason,
      nowMs,
    });
    noteStep(tx, { disputeId: first.id, kind: "appealed", actorId: actor.id, reason, nowMs });
    return id;
  });
}
