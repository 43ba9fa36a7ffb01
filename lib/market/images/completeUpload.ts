import { and, eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { enqueue } from "@/lib/jobs/queue";
import { requireBatch } from "@/lib/market/access";
import { completeMultipart, findObjectSize, type PartTag } from "@/lib/services/store";

type Input = { actor: Actor; nowMs: number; imageId: string; parts: PartTag[] };

/** The browser says that a file is up: it is joined if it came in parts, measured, and queued for checking. */
export async function completeUpload({ actor, nowMs, imageId, parts }: Input): Promise<void> {
  const db = getDb();
  const image = findImage(db, imageId);
  if (!image) throw new AppError("not_found", "There is no such image.");
  requireBatch(db, image.batchId, actor, "editor");
  if (image.status !== "awaiting") return; // said twice
  if (image.uploadId) await completeMultipart(image.originalKey, image.uploadId, parts);
  const size = await findObjectSize(image.originalKey);
  if (size === null) throw new AppError("conflict", "The file has not arrived. Upload it again.");
  inTransaction(db, (tx) => {
    const moved = tx
      .update(images)
      .set({ status: "checking", uploadId: null })
      .where(and(eq(images.id, imageId), eq(images.status, "awaiting")))
      .run();
    if (moved.changes === 0) return;
    enqueue(tx, {
      kind: "image.check",
      payload: { imageId },
      subject: image.batchId,
      uniqueKey: `check:${imageId}`,
      nowMs,
      priority: 3,
    });
  });
}
