import { and, eq, inArray } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { enqueue } from "@/lib/jobs/queue";
import { requireBatch } from "@/lib/market/access";

/** Looks for proposals once more on the images where it failed or never ran. Returns how many. */
export function retryProposals({
  actor,
  nowMs,
  batchId,
}: {
  actor: Actor;
  nowMs: number;
  batchId: string;
}): number {
  return inTransaction(getDb(), (tx) => {
    requireBatch(tx, batchId, actor, "editor");
    const waiting = tx
      .select({ id: images.id })
      .from(images)
      .where(
        and(
          eq(images.batchId, batchId),
          eq(images.status, "ready"),
          inArray(images.proposalState, ["none", "failed"]),
        ),
      )
      .all();
    for (const { id } of waiting) {
      enqueue(tx, {
        kind: "image.propose",
        payload: { imageId: id },
        subject: batchId,
        uniqueKey: `propose:${id}`,
        nowMs,
        attemptsMax: 3,
      });
      tx.update(images).set({ proposalState: "queued" }).where(eq(images.id, id)).run();
    }
    return waiting.length;
  });
}
