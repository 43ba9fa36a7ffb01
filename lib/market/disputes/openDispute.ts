import { and, eq } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findBatch, findImage, listClasses, type BatchRow, type ImageRow } from "@/db/queries/batches";
import {
  findDispute,
  findRun,
  findSubmission,
  listSubmissionsOf,
  type SubmissionRow,
} from "@/db/queries/work";
import { disputes } from "@/db/schema";
import type { ErrorKind } from "@/db/schema/work";
import type { Actor } from "@/lib/auth/actor";
import { env } from "@/lib/env";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { listPartiesOf } from "./parties";
import { freezeEvidence } from "./evidence";
import { noteStep } from "./steps";
import { tellAdmins, tellParties } from "./tell";

type By = { actor: Actor; nowMs: number };
/** What kind of error it is about, and which class of the key. */
type About = { errorKind?: ErrorKind; classId?: string | null };

const HOUR_MS = 3_600_000;

/** The time within which the docket promises a decision; more money at stake is decided sooner. */
const TARGET_MS = 48 * HOUR_MS;
const TARGET_LARGE_MS = 24 * HOUR_MS;

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
  about?: About;
  appealOf?: string;
  runId: string | null;
  submissionId: string | null;
  openedBy: string | null;
  reason: string;
  nowMs: number;
};

/** Puts a dispute on the docket: freezes its evidence, tells the admins who may decide it, and both sides. */
export function insertDispute(
  tx: Tx,
  { batch, image, kind, about = {}, appealOf, runId, submissionId, openedBy, reason, nowMs }: New,
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
  const classId = about.classId ?? null;
  if (classId && !listClasses(tx, batch.id).some((row) => row.id === classId))
    throw new AppError("invalid", "The key has no such class.", { classId: "Not in the key." });
  const id = newId("dsp");
  const stakeCents = stakeOf(batch, touched);
  const targetMs = stakeCents >= env().DISPUTE_TWO_ADMINS_CENTS ? TARGET_LARGE_MS : TARGET_MS;
  const evidence = freezeEvidence(tx, { disputeId: id, batch, image, runId, submissionId, nowMs });
  tx.insert(disputes)
    .values({
      id,
      batchId: batch.id,
      imageId: image.id,
      submissionId,
      subject,
      kind,
      errorKind: kind === "split" ? "disagreement" : (about.errorKind ?? "other"),
      classId,
      appealOf: appealOf ?? null,
      openedBy,
      reason,
      status: "open",
      evidence: evidence.summary,
      stakeCents,
      openedAtMs: nowMs,
      dueAtMs: nowMs + targetMs,
    })
    .run();
  evidence.keep();
  noteStep(tx, { disputeId: id, kind: "opened", actorId: openedBy, reason, nowMs });
  audit(tx, {
    actorId: openedBy,
    action: "dispute.opened",
    subject: id,
    detail: {
      kind,
      imageId: image.id,
      submissionId,
      appealOf: appealOf ?? null,
      evidence: evidence.summary.sha256,
    },
    nowMs,
  });
  const dispute = findDispute(tx, id);
  invariant(dispute, "the dispute was written");
  const what = appealOf ? "An appeal" : "A dispute";
  tellAdmins(tx, dispute, {
    subject: `On the docket: ${image.fileName}`,
    lines: [`${what} waits for a decision: ${batch.title}, ${image.fileName}.`, reason],
    label: "Open it",
    nowMs,
  });
  if (openedBy)
    tellParties(
      tx,
      listPartiesOf(tx, dispute).filter((party) => party.userId !== openedBy),
      {
        subject: `${appealOf ? "Appealed" : "Contested"}: ${image.fileName}`,
        lines: [
          `${appealOf ? "The decision about" : "The result of"} ${image.fileName} (${batch.title}) is ${appealOf ? "appealed" : "contested"}.`,
          `The reason given: ${reason}`,
          "An admin decides on the evidence as it is now. Until then nothing changes.",
        ],
        tag: "contested",
        nowMs,
      },
    );
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
  if (nowMs > sinceMs + batch.disputeWindowHours * HOUR_MS) {
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
  if (decided)
    throw new AppError("conflict", "An admin has decided on this already. You can appeal the decision.");
}

/** An annotator contests the score of an own submission. */
export function contestScore({
  actor,
  nowMs,
  submissionId,
  reason,
  ...about
}: By & About & { submissionId: string; reason: string }): string {
  return inTransaction(getDb(), (tx) => {
    const submission = findSubmission(tx, submissionId);
    if (!submission || submission.annotatorId !== actor.id)
      throw new AppError("not_found", "There is no such submission.");
    const run = submission.scoredRunId ? findRun(tx, submission.scoredRunId) : undefined;
    if (!run) throw new AppError("conflict", "There is no score to contest yet.");
    if (run.origin === "decision")
      throw new AppError(
        "conflict",
        "An admin has decided on this image already. You can appeal the decision.",
      );
    requireUndecided(tx, submission.id);
    const batch = findBatch(tx, submission.batchId);
    const image = findImage(tx, submission.imageId);
    invariant(batch && image, "a submission has a batch and an image");
    requireWindow(batch, run.createdAtMs, nowMs);
    return insertDispute(tx, {
      batch,
      image,
      kind: "score",
      about,
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
  ...about
}: By & About & { imageId: string; reason: string }): string {
  return inTransaction(getDb(), (tx) => {
    const image = findImage(tx, imageId);
    if (!image) throw new AppError("not_found", "There is no such image.");
    const batch = requireBatch(tx, image.batchId, actor, "editor");
    const run = image.currentRunId ? findRun(tx, image.currentRunId) : undefined;
    if (!run || image.consensusState !== "settled")
      throw new AppError("conflict", "Only a settled image can be contested.");
    if (run.origin === "decision")
      throw new AppError(
        "conflict",
        "An admin has decided on this image already. You can appeal the decision.",
      );
    requireUndecided(tx, image.id);
    requireWindow(batch, run.createdAtMs, nowMs);
    return insertDispute(tx, {
      batch,
      image,
      kind: "image",
      about,
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
    noteStep(tx, { disputeId, kind: "withdrawn", actorId: actor.id, nowMs });
    audit(tx, { actorId: actor.id, action: "dispute.withdrawn", subject: disputeId, nowMs });
  });
}
