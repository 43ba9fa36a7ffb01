import { eq } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import {
  findBatch,
  findImage,
  listClasses,
  type BatchRow,
  type ClassRow,
  type ImageRow,
} from "@/db/queries/batches";
import { listSubmissionsOf, type SubmissionRow } from "@/db/queries/work";
import { consensusRuns, images, submissions } from "@/db/schema";
import { mergeImage } from "@/lib/consensus/mergeImage";
import type { AnnotatorScore, ConsensusSettings, ImageConsensus, ImageLabels } from "@/lib/consensus/types";
import { invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { tellIfAllSettled } from "@/lib/market/batches/batchLetters";
import { openSplitDispute } from "@/lib/market/disputes/openDispute";
import { adjustSubmissionPay, releaseForSubmission } from "@/lib/market/money/settlement";
import { payOf } from "./payOf";
import { reliabilityOf } from "./reliabilityOf";

/** The submissions of one image as the consensus engine takes them. */
export function labelsOf(
  image: ImageRow,
  list: readonly Pick<SubmissionRow, "annotatorId" | "document">[],
): ImageLabels {
  invariant(image.width && image.height, "an image with submissions was checked");
  return {
    width: image.width,
    height: image.height,
    annotators: list.map(({ annotatorId, document }) => ({ annotatorId, instances: document.instances })),
  };
}

/** The batch's settings as the engine takes them. */
export function settingsOf(batch: BatchRow, key: readonly ClassRow[]): Partial<ConsensusSettings> {
  return {
    kMin: batch.kMin,
    kMax: batch.kMax,
    agreementTarget: batch.agreementTarget,
    classNames: Object.fromEntries(key.map((row) => [row.id, row.name])),
    boxClasses: key.filter((row) => row.geometry === "box").map((row) => row.id),
  };
}

/**
 * The job behind each image that has its submissions: merges them, and then, in one transaction, records the
 * run and acts on it. Settled: pays each annotator by the score. Short: asks for one more. Split: opens a
 * dispute. Running it again on the same submissions changes nothing.
 */
export function settleImage({ imageId, nowMs }: { imageId: string; nowMs: number }): void {
  const db = getDb();
  const image = findImage(db, imageId);
  const batch = image && findBatch(db, image.batchId);
  if (!image || !batch || batch.status === "closed") return; // closing paid what was there
  if (isOver(image)) return;
  const list = listSubmissionsOf(db, imageId);
  if (list.length < image.slotsWanted) return;
  const key = listClasses(db, batch.id);
  const settings = settingsOf(batch, key);
  const startMs = performance.now();
  const result = mergeImage(labelsOf(image, list), settings, reliabilityOf(db, batch, settings));
  const millis = Math.round(performance.now() - startMs);
  inTransaction(db, (tx) => {
    const current = findImage(tx, imageId);
    if (!current || isOver(current)) return;
    if (findBatch(tx, batch.id)?.status === "closed") return;
    if (listSubmissionsOf(tx, imageId).length !== list.length) return; // one more came in: its own job follows
    const runId = recordRun(tx, {
      image,
      origin: "engine",
      disputeId: null,
      submissionList: list,
      settings,
      result,
      millis,
      nowMs,
    });
    if (result.verdict === "short" && image.slotsWanted < batch.kMax) {
      tx.update(images)
        .set({ consensusState: "short", slotsWanted: image.slotsWanted + 1, currentRunId: runId })
        .where(eq(images.id, imageId))
        .run();
      return;
    }
    if (result.verdict === "settled") {
      settle(tx, { image, runId, nowMs });
      tellIfAllSettled(tx, batch, nowMs);
      applyScores(tx, { batch, key, list, scores: result.scores, runId, disputeId: null, nowMs });
      return;
    }
    tx.update(images)
      .set({ consensusState: "split", currentRunId: runId })
      .where(eq(images.id, imageId))
      .run();
    openSplitDispute(tx, { batch, image, runId, reason: result.reason, nowMs });
  });
}

/** Nothing more is merged: it is settled, on the docket, or set aside. */
const isOver = ({ consensusState }: ImageRow) => consensusState !== "none" && consensusState !== "short";

type NewRun = {
  image: ImageRow;
  origin: "engine" | "decision";
  disputeId: string | null;
  submissionList: readonly SubmissionRow[];
  settings: Partial<ConsensusSettings>;
  result: ImageConsensus;
  millis: number;
  nowMs: number;
};

/** Keeps a run. Runs are only ever added. Returns its id. */
export function recordRun(tx: Tx, run: NewRun): string {
  const id = newId("run");
  tx.insert(consensusRuns)
    .values({
      id,
      batchId: run.image.batchId,
      imageId: run.image.id,
      origin: run.origin,
      disputeId: run.disputeId,
      verdict: run.result.verdict,
      agreement: run.result.agreement,
      predictedIou: run.result.predictedQuality.value,
      submissionIds: run.submissionList.map((submission) => submission.id),
      settings: { ...run.settings },
      result: run.result,
      millis: run.millis,
      createdAtMs: run.nowMs,
    })
    .run();
  return id;
}

/** Marks the image settled by a run, and lets the batch's proposals learn from it. */
export function settle(
  tx: Tx,
  { image, runId, nowMs }: { image: ImageRow; runId: string; nowMs: number },
): void {
  tx.update(images)
    .set({ consensusState: "settled", currentRunId: runId, settledAtMs: nowMs })
    .where(eq(images.id, image.id))
    .run();
  enqueue(tx, {
    kind: "batch.train",
    payload: { batchId: image.batchId },
    subject: image.batchId,
    uniqueKey: `train:${image.batchId}`,
    nowMs,
    delayMs: 2000, // images that settle together train once
    priority: -5,
    attemptsMax: 3,
  });
}

/** What each submission earns by its score, the largest reductions first, so that there is money for what rises. */
function paysOf({ batch, key, list, scores }: Pick<Scored, "batch" | "key" | "list" | "scores">) {
  const scoreOf = new Map(scores.map((score) => [score.annotatorId, score]));
  return list
    .map((submission) => {
      const score = scoreOf.get(submission.annotatorId);
      invariant(score, "each annotator of an image is scored");
      const { payCents, feeCents } = payOf(batch, key, submission.document, score);
      const costCents = payCents + feeCents - (submission.payCents ?? 0) - (submission.feeCents ?? 0);
      return { submission, score, payCents, feeCents, costCents };
    })
    .sort((a, b) => a.costCents - b.costCents);
}

type Scored = {
  batch: BatchRow;
  key: readonly ClassRow[];
  list: readonly SubmissionRow[];
  scores: readonly AnnotatorScore[];
  runId: string;
  disputeId: string | null;
  nowMs: number;
};

/**
 * Writes score and pay of each submission. The first score pays; a later one moves the difference by a posting
 * linked to the first. Only a decision lowers a pay that was posted: a consensus that follows pay by time
 * (settleOverdue) raises it or leaves it. Returns the cents by which pay rose in sum.
 */
export function applyScores(tx: Tx, { batch, key, list, scores, runId, disputeId, nowMs }: Scored): number {
  let movedCents = 0;
  for (const due of paysOf({ batch, key, list, scores })) {
    const { submission, score } = due;
    const isKept = disputeId === null && due.payCents < (submission.payCents ?? 0);
    const payCents = isKept ? (submission.payCents ?? 0) : due.payCents;
    const feeCents = isKept ? (submission.feeCents ?? 0) : due.feeCents;
    const parties = { submissionId: submission.id, batchId: batch.id, annotatorId: submission.annotatorId };
    if (submission.payCents === null) {
      if (payCents > 0) releaseForSubmission(tx, { ...parties, payCents, feeCents, nowMs });
      movedCents += payCents;
    } else if (submission.payCents !== payCents || submission.feeCents !== feeCents) {
      adjustSubmissionPay(tx, {
        ...parties,
        cause: disputeId ?? runId,
        oldPayCents: submission.payCents,
        oldFeeCents: submission.feeCents ?? 0,
        newPayCents: payCents,
        newFeeCents: feeCents,
        nowMs,
      });
      movedCents += payCents - submission.payCents;
    }
    tx.update(submissions)
      .set({
        scoredRunId: runId,
        quality: score.quality,
        payCents,
        feeCents,
        paidAtMs: submission.paidAtMs ?? nowMs,
      })
      .where(eq(submissions.id, submission.id))
      .run();
  }
  return movedCents;
}
