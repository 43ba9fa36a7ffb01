import { getDb } from "@/db/client";
import { countPendingImages, listReleases, progressOf } from "@/db/queries/batches";
import { findLatestTraining } from "@/db/queries/models";
import type { Actor } from "@/lib/auth/actor";
import { listUnfinishedJobs } from "@/lib/jobs/queue";
import { requireBatch } from "@/lib/market/access";

export type BatchStatus = ReturnType<typeof batchStatus>;

/** How far a batch and the work behind it are. */
export function batchStatus({ actor, batchId }: { actor: Actor; batchId: string }) {
  const db = getDb();
  const batch = requireBatch(db, batchId, actor);
  const jobs = listUnfinishedJobs(db, batchId);
  const training = findLatestTraining(db, batchId);
  const of = (kind: string) => jobs.filter((job) => job.kind === kind).length;
  return {
    status: batch.status,
    progress: progressOf(db, [batchId]).get(batchId) ?? null,
    pendingImages: countPendingImages(db, batchId),
    checking: of("image.check"),
    proposing: of("image.propose"),
    settling: of("consensus.settle"),
    learning: of("batch.train") > 0,
    training: training
      ? {
          version: training.version,
          settledImages: training.settledImages,
          useful: training.useful,
          apWith: training.apWith,
          apWithout: training.apWithout,
        }
      : null,
    releases: listReleases(db, batchId).map(({ id, number, status }) => ({ id, number, status })),
  };
}
