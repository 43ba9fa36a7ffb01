import { and, eq, sql } from "drizzle-orm";
import type { Tx } from "@/db/client";
import { claims, images } from "@/db/schema";
import { queueProposals } from "./queueProposals";

/**
 * Has the pictures of a batch that nobody has begun to draw looked at again, because what is known of the batch changed. A
 * picture that people draw keeps the proposals that they were dealt. Returns how many.
 */
export function proposeAgain(tx: Tx, { batchId, nowMs }: { batchId: string; nowMs: number }): number {
  const untouched = tx
    .select({ id: images.id })
    .from(images)
    .where(
      and(
        eq(images.batchId, batchId),
        eq(images.status, "ready"),
        eq(images.consensusState, "none"),
        sql`not exists (select 1 from ${claims} c where c.image_id = ${images.id} and c.status in ('live', 'submitted'))`,
      ),
    )
    .all();
  for (const { id } of untouched) {
    queueProposals(tx, { imageId: id, batchId, nowMs, priority: -2 });
  }
  return untouched.length;
}
