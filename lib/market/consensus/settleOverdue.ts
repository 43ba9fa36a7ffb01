import { and, asc, eq, inArray, isNull, lte } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findBatch, findImage, listClasses } from "@/db/queries/batches";
import { listSubmissionsOf } from "@/db/queries/work";
import { batches, images, submissions } from "@/db/schema";
import { mergeImage } from "@/lib/consensus/mergeImage";
import { env } from "@/lib/env";
import { reliabilityOf } from "./reliabilityOf";
import { applyScores, labelsOf, recordRun, settingsOf } from "./settleImage";

const HOUR_MS = 3_600_000;

type Run = { nowMs: number; progress?: (share: number) => void };

/**
 * Nobody waits for pay longer than the stated time (SETTLE_WITHIN_HOURS, 72 by default), whoever is silent: a
 * submission that has no pay by then is scored against what is there and paid. The picture stays open; a later
 * consensus raises the pay where it scores higher, and never lowers it. One transaction a picture; a repeat
 * finds nothing to do.
 */
export function settleOverdue({ nowMs, progress }: Run): { images: number } {
  const db = getDb();
  const waiting = db
    .selectDistinct({ imageId: submissions.imageId })
    .from(submissions)
    .innerJoin(images, eq(images.id, submissions.imageId))
    .innerJoin(batches, eq(batches.id, submissions.batchId))
    .where(
      and(
        isNull(submissions.payCents),
        lte(submissions.submittedAtMs, nowMs - env().SETTLE_WITHIN_HOURS * HOUR_MS),
        inArray(batches.status, ["open", "paused"]),
        inArray(images.consensusState, ["none", "short", "split"]),
      ),
    )
    .orderBy(asc(submissions.imageId))
    .all();
  waiting.forEach(({ imageId }, index) => {
    inTransaction(db, (tx) => payAsItStands(tx, imageId, nowMs));
    progress?.((index + 1) / waiting.length);
  });
  return { images: waiting.length };
}

function payAsItStands(tx: Tx, imageId: string, nowMs: number): void {
  const image = findImage(tx, imageId);
  const batch = image && findBatch(tx, image.batchId);
  if (!image || !batch || batch.status === "closed" || image.consensusState === "settled") return;
  const list = listSubmissionsOf(tx, imageId);
  if (list.every((submission) => submission.payCents !== null)) return;
  const key = listClasses(tx, batch.id);
  const settings = settingsOf(batch, key);
  const merged = mergeImage(labelsOf(image, list), settings, reliabilityOf(tx, batch, settings));
  const result = {
    ...merged,
    verdict: image.consensusState === "split" ? ("split" as const) : ("short" as const),
    reason: `Paid as it stood after ${env().SETTLE_WITHIN_HOURS} hours. A later result can raise this pay and does not lower it; a decided dispute can do either.`,
  };
  const runId = recordRun(tx, {
    image,
    origin: "engine",
    disputeId: null,
    submissionList: list,
    settings,
    result,
    millis: 0,
    nowMs,
  });
  tx.update(images).set({ currentRunId: runId }).where(eq(images.id, imageId)).run();
  applyScores(tx, { batch, key, list, scores: result.scores, runId, disputeId: null, nowMs });
}
