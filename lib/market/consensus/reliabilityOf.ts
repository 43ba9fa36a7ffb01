import { findLabelsOf, listLabelStamps } from "@/db/queries/reliability";
import type { Reader } from "@/db/client";
import type { BatchRow } from "@/db/queries/batches";
import { ReliabilityBatch } from "@/lib/consensus/reliability";
import type { ConsensusSettings, Reliability } from "@/lib/consensus/types";
import { invariant } from "@/lib/errors";

/** Images from which a batch's annotators are judged: the latest, so that people may change, and cost stays flat. */
export const RELIABILITY_IMAGES_MAX = 200;
/** Batches whose grouped votes are kept; the one that was used longest ago goes first. */
const KEPT_BATCHES_MAX = 32;

type Kept = { settingsKey: string; batch: ReliabilityBatch; stamps: Map<string, string> };

/** A cache and nothing more: whatever is missing or out of date in it is read and grouped again. */
const keptBatches = new Map<string, Kept>();

/**
 * What the batch's submissions so far tell about its annotators; undefined before two people drew one image. Groups
 * only images whose submissions changed since the last call in this process (most often one) and runs the EM over
 * what it kept of the others, so the answer is the one from scratch and the cost does not grow with the batch.
 */
export function reliabilityOf(
  db: Reader,
  { id: batchId }: Pick<BatchRow, "id">,
  settings: Partial<ConsensusSettings>,
): Reliability | undefined {
  const wanted = listLabelStamps(db, batchId, RELIABILITY_IMAGES_MAX);
  if (wanted.length === 0) return undefined;
  const kept = keptFor(batchId, settings);
  const wantedIds = new Set(wanted.map(({ imageId }) => imageId));
  for (const imageId of [...kept.stamps.keys()].filter((id) => !wantedIds.has(id))) {
    kept.batch.remove(imageId);
    kept.stamps.delete(imageId);
  }
  const changed = wanted.filter(({ imageId, stamp }) => kept.stamps.get(imageId) !== stamp);
  const labelsOf = findLabelsOf(
    db,
    changed.map(({ imageId }) => imageId),
  );
  for (const { imageId, stamp } of changed) {
    const labels = labelsOf.get(imageId);
    invariant(labels, "an image with a stamp has submissions");
    kept.batch.put(imageId, labels);
    kept.stamps.set(imageId, stamp);
  }
  return kept.batch.estimate();
}

function keptFor(batchId: string, settings: Partial<ConsensusSettings>): Kept {
  const settingsKey = JSON.stringify(settings);
  const found = keptBatches.get(batchId);
  keptBatches.delete(batchId);
  const kept =
    found?.settingsKey === settingsKey
      ? found
      : { settingsKey, batch: new ReliabilityBatch(settings), stamps: new Map<string, string>() };
  keptBatches.set(batchId, kept); // now the last in order of use
  for (const oldest of keptBatches.keys()) {
    if (keptBatches.size <= KEPT_BATCHES_MAX) break;
    keptBatches.delete(oldest);
  }
  return kept;
}
