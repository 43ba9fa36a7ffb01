import { eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { briefExamples, images, importedPredictions, proposalSets } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { requireBatch } from "@/lib/market/access";
import { abortMultipart, deleteObject } from "@/lib/services/store";

/** Takes an image out of a draft batch, with every stored copy. */
export async function removeImage({ actor, imageId }: { actor: Actor; imageId: string }): Promise<void> {
  const image = inTransaction(getDb(), (tx) => {
    const found = findImage(tx, imageId);
    if (!found) throw new AppError("not_found", "There is no such image.");
    const batch = requireBatch(tx, found.batchId, actor, "editor");
    if (batch.status !== "draft") throw new AppError("conflict", "Images of a funded batch stay.");
    tx.delete(briefExamples).where(eq(briefExamples.imageId, imageId)).run();
    tx.delete(proposalSets).where(eq(proposalSets.imageId, imageId)).run();
    tx.delete(importedPredictions).where(eq(importedPredictions.imageId, imageId)).run();
    tx.delete(images).where(eq(images.id, imageId)).run();
    return found;
  });
  if (image.uploadId) await abortMultipart(image.originalKey, image.uploadId);
  for (const key of [image.originalKey, image.workingKey, image.thumbKey]) if (key) await deleteObject(key);
}
