import { and, eq, inArray } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { requireBatch } from "@/lib/market/access";
import { queueProposals } from "@/lib/market/proposals/queueProposals";

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
      queueProposals(tx, { imageId: id, batchId, nowMs });
      tx.update(images).set({ proposalState: "queued" }).where(eq(images.id, id)).run();
    }
    return waiting.length;
  });
}
