import { and, count, eq, inArray, isNull } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { countWork, listClasses } from "@/db/queries/batches";
import { listSubmissionsOf } from "@/db/queries/work";
import { batches, disputes, images, submissions } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { findImage } from "@/db/queries/batches";
import { mergeImage } from "@/lib/consensus/mergeImage";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { applyScores, labelsOf, recordRun, settingsOf } from "@/lib/market/consensus/settleImage";
import { reliabilityOf } from "@/lib/market/consensus/reliabilityOf";
import { closeBatchEscrow } from "@/lib/market/money/settlement";
import { expireClaims } from "@/lib/market/work/expireClaims";

type By = { actor: Actor; nowMs: number; batchId: string };

/**
 * Ends a batch: what was handed in but not settled is scored and paid as it stands, the rest of the escrow
 * goes back to the team's wallet. Not while somebody is drawing or a dispute is open.
 */
export function closeBatch({ actor, nowMs, batchId }: By): { returnedCents: number } {
  return inTransaction(getDb(), (tx) => {
    expireClaims(tx, nowMs);
    const batch = requireBatch(tx, batchId, actor, "editor");
    if (batch.status !== "open" && batch.status !== "paused")
      throw new AppError("conflict", `This batch is ${batch.status}.`);
    const { live } = countWork(tx, batchId);
    if (live > 0)
      throw new AppError(
        "conflict",
        `${live} ${live === 1 ? "person is" : "people are"} drawing. Pause the batch and close it when they are done.`,
      );
    const openDisputes =
      tx
        .select({ count: count() })
        .from(disputes)
        .where(and(eq(disputes.batchId, batchId), eq(disputes.status, "open")))
        .get()?.count ?? 0;
    if (openDisputes > 0)
      throw new AppError(
        "conflict",
        `${openDisputes} ${openDisputes === 1 ? "dispute waits" : "disputes wait"} for a decision first.`,
      );
    payUnsettled();
    const returnedCents = closeBatchEscrow(tx, { batchId, teamId: batch.teamId, nowMs });
    tx.update(batches)
      .set({ status: "closed", closedAtMs: nowMs, version: batch.version + 1 })
      .where(eq(batches.id, batchId))
      .run();
    audit(tx, {
      actorId: actor.id,
      action: "batch.closed",
      subject: batchId,
      detail: { returnedCents },
      nowMs,
    });
    return { returnedCents };

    /** Nobody's handed-in work goes unpaid because the requester stops early. */
    function payUnsettled(): void {
      invariant(batch, "the batch was loaded");
      const key = listClasses(tx, batchId);
      const settings = settingsOf(batch, key);
      const reliability = reliabilityOf(tx, batch, settings);
      const waiting = tx
        .selectDistinct({ imageId: submissions.imageId })
        .from(submissions)
        .innerJoin(images, eq(images.id, submissions.imageId))
        .where(
          and(
            eq(submissions.batchId, batchId),
            isNull(submissions.payCents),
            inArray(images.consensusState, ["none", "short"]),
          ),
        )
        .all();
      for (const { imageId } of waiting) {
        const image = findImage(tx, imageId);
        invariant(image, "a submission has an image");
        const list = listSubmissionsOf(tx, imageId);
        const result = mergeImage(labelsOf(image, list), settings, reliability);
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
        // An image whose consensus was due and is good enough belongs to the releases.
        const settled = result.verdict === "settled" && {
          consensusState: "settled" as const,
          settledAtMs: nowMs,
        };
        tx.update(images)
          .set({ currentRunId: runId, ...settled })
          .where(eq(images.id, imageId))
          .run();
        applyScores(tx, { batch, key, list, scores: result.scores, runId, disputeId: null, nowMs });
      }
    }
  });
}
