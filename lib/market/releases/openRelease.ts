import { getDb } from "@/db/client";
import { findRelease } from "@/db/queries/batches";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { requireBatch } from "@/lib/market/access";
import { streamObject } from "@/lib/services/store";

/** A finished release of a batch that the actor may see, as a stream. */
export async function openRelease({ actor, releaseId }: { actor: Actor; releaseId: string }) {
  const db = getDb();
  const release = findRelease(db, releaseId);
  if (!release) throw new AppError("not_found", "There is no such release.");
  const batch = requireBatch(db, release.batchId, actor);
  if (release.status !== "ready") throw new AppError("conflict", "This release is still being built.");
  invariant(release.storageKey && release.sha256, "a ready release is stored");
  const { stream } = await streamObject(release.storageKey);
  const slug =
    batch.title
      .toLowerCase()
      .replace(/[^a-z0-9]+/g, "-")
      .replace(/^-|-$/g, "") || "batch";
  return {
    stream,
    byteSize: release.byteSize,
    sha256: release.sha256,
    fileName: `${slug}-release-${release.number}.zip`,
  };
}
