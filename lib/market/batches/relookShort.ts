import { and, eq, gte, notExists } from "drizzle-orm";
import type { Tx } from "@/db/client";
import { listSubmissionsOf } from "@/db/queries/work";
import { claims, consensusRuns, images } from "@/db/schema";
import { enqueue } from "@/lib/jobs/queue";

/**
 * Looks again at the images that ask for one more annotator and whose agreement already reaches the target: the
 * extra place is taken back and the image is merged again. Not where somebody is drawing in that place: their work
 * is awaited, and it is judged by the new target anyway. Returns how many are looked at.
 */
export function relookShort(
  tx: Tx,
  { batchId, target, version, nowMs }: { batchId: string; target: number; version: number; nowMs: number },
): number {
  const live = tx
    .select({ id: claims.id })
    .from(claims)
    .where(and(eq(claims.imageId, images.id), eq(claims.status, "live")));
  const waiting = tx
    .select({ id: images.id })
    .from(images)
    .innerJoin(consensusRuns, eq(consensusRuns.id, images.currentRunId))
    .where(
      and(
        eq(images.batchId, batchId),
        eq(images.consensusState, "short"),
        gte(consensusRuns.agreement, target),
        notExists(live),
      ),
    )
    .orderBy(images.ordinal)
    .all();
  for (const { id } of waiting) {
    tx.update(images)
      .set({ slotsWanted: listSubmissionsOf(tx, id).length })
      .where(eq(images.id, id))
      .run();
    enqueue(tx, {
      kind: "consensus.settle",
      payload: { imageId: id },
      subject: batchId,
      // With the batch's version, so that an earlier look does not swallow this one.
      uniqueKey: `settle:${id}:target:${version}`,
      nowMs,
      priority: 4,
    });
  }
  return waiting.length;
}
