import { eq, sql } from "drizzle-orm";
import type { z } from "zod";
import { getDb, inTransaction } from "@/db/client";
import { findByHash, type ImageRow } from "@/db/queries/batches";
import { images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import {
  IMAGE_BYTES_MAX,
  IMAGE_TYPES,
  type PlanUploadsInput,
  type UploadPlan,
} from "@/lib/contracts/batches";
import { AppError } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { requireBatch } from "@/lib/market/access";
import { listParts, presignPart, presignPut, startMultipart } from "@/lib/services/store";

type File = z.output<typeof PlanUploadsInput>["files"][number];
type Input = { actor: Actor; nowMs: number; batchId: string; files: File[] };

/** Files above this go up in parts, so that a pause or a reload loses one part at most. */
export const PART_BYTES = 8 * 1024 * 1024;

/**
 * Says for each file what the browser is to do: put it, put its parts (with those that arrived before a
 * reload), or nothing, because the batch has the same bytes already or the file can be refused by its name
 * and size. The plans stand in the order of the files.
 */
export async function planUploads({ actor, nowMs, batchId, files }: Input): Promise<UploadPlan[]> {
  const decided = inTransaction(getDb(), (tx) => {
    const batch = requireBatch(tx, batchId, actor, "editor");
    if (batch.status !== "draft")
      throw new AppError("conflict", "Images can be added only before a batch is funded.");
    let ordinal =
      tx
        .select({ max: sql<number>`coalesce(max(${images.ordinal}), -1)` })
        .from(images)
        .where(eq(images.batchId, batchId))
        .get()?.max ?? -1;
    return files.map((file): { plan: UploadPlan } | { image: ImageRow } => {
      const reason = refusalOf(file);
      if (reason) return { plan: { kind: "refused", reason } };
      const known = findByHash(tx, batchId, file.sha256);
      if (known && known.status !== "awaiting")
        return { plan: { kind: "duplicate", imageId: known.id, fileName: known.fileName } };
      if (known) return { image: known }; // announced before, not arrived: goes on
      const id = newId("img");
      ordinal += 1;
      const image = tx
        .insert(images)
        .values({
          id,
          batchId,
          fileName: file.name,
          byteSize: file.byteSize,
          sha256: file.sha256,
          mediaType: file.mediaType,
          originalKey: `batches/${batchId}/uploads/${id}`,
          ordinal,
          createdAtMs: nowMs,
        })
        .returning()
        .get();
      return { image };
    });
  });
  // A file named twice in one drop is planned once; its twin is a duplicate.
  const planned = new Set<string>();
  const plans: UploadPlan[] = [];
  for (const entry of decided) {
    if ("plan" in entry) plans.push(entry.plan);
    else if (planned.has(entry.image.id))
      plans.push({ kind: "duplicate", imageId: entry.image.id, fileName: entry.image.fileName });
    else plans.push(await planFor(entry.image));
    if ("image" in entry) planned.add(entry.image.id);
  }
  return plans;
}

function refusalOf(file: File): string | null {
  if (file.byteSize === 0) return "The file is empty.";
  if (file.byteSize > IMAGE_BYTES_MAX) return "The file is over 50 MB.";
  const isKnownType = (IMAGE_TYPES as readonly string[]).includes(file.mediaType);
  if (!isKnownType) return "Only JPEG, PNG, WebP, AVIF and TIFF pictures are taken.";
  return null;
}

async function planFor(image: ImageRow): Promise<UploadPlan> {
  if (image.byteSize <= PART_BYTES) {
    return {
      kind: "put",
      imageId: image.id,
      ...(await presignPut(image.originalKey, image.byteSize, image.mediaType)),
    };
  }
  let uploadId = image.uploadId;
  let present = uploadId ? await listParts(image.originalKey, uploadId) : null;
  if (!uploadId || !present) {
    uploadId = await startMultipart(image.originalKey, image.mediaType);
    present = [];
    getDb().update(images).set({ uploadId }).where(eq(images.id, image.id)).run();
  }
  const count = Math.ceil(image.byteSize / PART_BYTES);
  const parts = [];
  for (let number = 1; number <= count; number++) {
    parts.push({ number, url: await presignPart(image.originalKey, uploadId, number) });
  }
  return { kind: "parts", imageId: image.id, partBytes: PART_BYTES, parts, present };
}
