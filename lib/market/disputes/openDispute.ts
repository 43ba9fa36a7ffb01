import { and, eq, isNotNull } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findBatch, findImage, type BatchRow, type ImageRow } from "@/db/queries/batches";
import { findRun, findSubmission, listSubmissionsOf, type SubmissionRow } from "@/db/queries/work";
import { disputes, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";

type By = { actor: Actor; nowMs: number };

/** The time within which the docket promises a decision. */
const TARGET_MS = 48 * 3_600_000;

/** What the decision will be judged on, frozen now: later edits of brief or settings do not touch it. */
function freeze(batch: BatchRow, image: ImageRow, runId: string | null, list: readonly SubmissionRow[]) {
  return {
    runId,
    imageSize: [image.width, image.height],
    briefVersion: batch.briefVersion,
    settings: {
      kMin: batch.kMin,
      kMax: batch.kMax,
      agreementTarget: batch.agreementTarget,
      baseCents: batch.baseCents,
      boxCents: batch.boxCents,
      polygonCents: batch.polygonCents,
      capCents: batch.capCents,
      feeBps: batch.feeBps,
    },
    submissions: list.map(({ id, sha256, annotatorId, activeSeconds, submittedAtMs, payCents, quality }) => ({
      id,
      sha256,
      annotatorId,
      activeSeconds,
      submittedAtMs,
      payCents,
      quality,
    })),
  };
}

/** What the decision could move at most: the cap of each submission on the image that it touches. */
function stakeOf(batch: BatchRow, list: readonly SubmissionRow[]): number {
  return list.reduce(
    (sum, submission) =>
      sum + Math.max(batch.capCents - (submission.payCents ?? 0), submission.payCents ?? 0),
    0,
  );
}

type New = {
  batch: BatchRow;
  image: ImageRow;
  kind: "score" | "image" | "split";
  runId: string | null;
  submissionId: string | null;
  openedBy: string | null;
  reason: string;
  nowMs: number;
};

function insertDispute(
  tx: Tx,
  { batch, image, kind, runId, submissionId, openedBy, reason, nowMs }: New,
): string {
  const all = listSubmissionsOf(tx, image.id);
  const touched = submissionId ? all.filter((submission) => submission.id === submissionId) : all;
  const subject = submissionId ?? image.id;
  const open = tx
    .select({ id: disputes.id })
    .from(disputes)
    .where(and(eq(disputes.subject, subject), eq(disputes.status, "open")))
    .get();
  if (open) throw new AppError("conflict", "This is on the docket already.");
  const id = newId("dsp");
  tx.insert(disputes)
    .values({
      id,
      batchId: batch.id,
      imageId: image.id,
      submissionId,
      subject,
      kind,
      openedBy,
      reason,
      status: "open",
      evidence: freeze(batch, image, runId, all),
      stakeCents: stakeOf(batch, touched),
      openedAtMs: nowMs,
      dueAtMs: nowMs + TARGET_MS,
    })
    .run();
  audit(tx, {
    actorId: openedBy,
    action: "dispute.opened",
    subject: id,
    detail: { kind, imageId: image.id, submissionId },
    nowMs,
  });
  for (const admin of tx
    .select()
    .from(users)
    .where(and(eq(users.role, "admin"), eq(users.status, "active"), isNotNull(users.emailVerifiedAtMs)))
    .all()) {
    post(
      tx,
      {
        to: admin.email,
        subject: `On the docket: ${image.fileName}`,
        lines: [`A dispute waits for a decision: ${batch.title}, ${image.fileName}.`, reason],
        action: { label: "Open it", path: `/docket/${id}` },
        tag: "docket",
      },
      nowMs,
    );
  }
  return id;
}

/** A split image goes to the docket by itself, inside the transaction that found it split. */
export function openSplitDispute(
  tx: Tx,
  {
    batch,
    image,
    runId,
    reason,
    nowMs,
  }: Pick<New, "batch" | "image" | "reason" | "nowMs"> & { runId: string },
): string {
  return insertDispute(tx, {
    batch,
    image,
    kind: "split",
    runId,
    submissionId: null,
    openedBy: null,
    reason,
    nowMs,
  });
}

function requireWindow(batch: BatchRow, sinceMs: number, nowMs: number): void {
  if (nowMs > sinceMs + batch.disputeWindowHours * 3_600_000) {
    throw new AppError("conflict", `The ${batch.disputeWindowHours} hours for contesting are over.`);
  }
}

/** What was contested and decided once is not contested again, not even when the decision was to keep it. */
function requireUndecided(tx: Tx, subject: string): void {
  const decided = tx
    .select({ id: disputes.id })
    .from(disputes)
    .where(and(eq(disputes.subject, subject), eq(disputes.status, "decided")))
    .get();
  if (decided) throw new AppError("conflict", "An admin has decided on this already. Write to us to appeal.");
}

/** An annotator contests the score of an own submission. */
export function contestScore({
  actor,
  nowMs,
  submissionId,
  reason,
}: By & { submissionId: string; reason: string }): string {
  return inTransaction(getDb(), (tx) => {
    const submission = findSubmission(tx, submissionId);
    if (!submission || submission.annotatorId !== actor.id)
      throw new AppError("not_found", "There is no such submission.");
    const run = submission.scoredRunId ? findRun(tx, submission.scoredRunId) : undefined;
    if (!run) throw new AppError("conflict", "There is no score to contest yet.");
    if (run.origin === "decision")
      throw new AppError("conflict", "An admin has decided on this image already. Write to us to appeal.");
    requireUndecided(tx, submission.id);
    const batch = findBatch(tx, submission.batchId);
    const image = findImage(tx, submission.imageId);
    invariant(batch && image, "a submission has a batch and an image");
    requireWindow(batch, run.createdAtMs, nowMs);
    return insertDispute(tx, {
      batch,
      image,
      kind: "score",
      runId: run.id,
      submissionId,
      openedBy: actor.id,
      reason,
      nowMs,
    });
  });
}

/** A requester contests the consensus of an image. */
export function contestImage({
  actor,
  nowMs,
  imageId,
  reason,
}: By & { imageId: string; reason: string }): string {
  return inTransaction(getDb(), (tx) => {
    const image = findImage(tx, imageId);
    if (!image) throw new AppError("not_found", "There is no such image.");
    const batch = requireBatch(tx, image.batchId, actor, "editor");
    const run = image.currentRunId ? findRun(tx, image.currentRunId) : undefined;
    if (!run || image.consensusState !== "settled")
      throw new AppError("conflict", "Only a settled image can be contested.");
    if (run.origin === "decision")
      throw new AppError("conflict", "An admin has decided on this image already. Write to us to appeal.");
    requireUndecided(tx, image.id);
    requireWindow(batch, run.createdAtMs, nowMs);
    return insertDispute(tx, {
      batch,
      image,
      kind: "image",
      runId: run.id,
      submissionId: null,
      openedBy: actor.id,
      reason,
      nowMs,
    });
  });
}

/** Whoever opened a dispute may take it back while it is open. */
export function withdrawDispute({ actor, nowMs, disputeId }: By & { disputeId: string }): void {
  inTransaction(getDb(), (tx) => {
    const changed = tx
      .update(disputes)
      .set({ status: "withdrawn", decidedAtMs: nowMs })
      .where(and(eq(disputes.id, disputeId), eq(disputes.openedBy, actor.id), eq(disputes.status, "open")))
      .run();
    if (changed.changes === 0)
      throw new AppError("not_found", "There is no open dispute of yours with this id.");
    audit(tx, { actorId: actor.id, action: "dispute.withdrawn", subject: disputeId, nowMs });
  });
}
