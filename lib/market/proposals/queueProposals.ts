import type { Tx } from "@/db/client";
import { enqueue } from "@/lib/jobs/queue";

/** Has the proposals of one picture found in the background; nothing new while that is asked for already. */
export function queueProposals(
  tx: Tx,
  {
    imageId,
    batchId,
    nowMs,
    priority,
  }: { imageId: string; batchId: string; nowMs: number; priority?: number },
): void {
  enqueue(tx, {
    kind: "image.propose",
    payload: { imageId },
    subject: batchId,
    uniqueKey: `propose:${imageId}`,
    nowMs,
    attemptsMax: 3,
    ...(priority !== undefined && { priority }),
  });
}
