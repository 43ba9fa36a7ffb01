import type { BatchRow, ClassRow } from "@/db/queries/batches";
import type { AnnotatorScore } from "@/lib/consensus/types";
import type { DeskDocument } from "@/lib/contracts/desk";
import { feeFor, payFor } from "@/lib/ledger/pricing";

/** Below this quality, with nothing agreed, a submission earns no base: it is not good-faith work. */
const GOOD_FAITH_QUALITY = 0.2;

/** What a submission earns by its score, and the platform's fee on top, in cents. Pure. */
export function payOf(
  batch: BatchRow,
  key: readonly ClassRow[],
  document: DeskDocument,
  score: AnnotatorScore,
) {
  const geometryOf = new Map(key.map((row) => [row.id, row.geometry]));
  const agreed = new Set(
    score.instances.filter((entry) => entry.outcome === "agreed").map((entry) => entry.instanceId),
  );
  const counted = document.instances.filter((instance) => agreed.has(instance.id));
  const agreedPolygons = counted.filter((instance) => geometryOf.get(instance.classId) === "polygon").length;
  const payCents = payFor(batch, {
    agreedBoxes: counted.length - agreedPolygons,
    agreedPolygons,
    goodFaith: agreed.size > 0 || score.quality >= GOOD_FAITH_QUALITY,
  });
  return { payCents, feeCents: feeFor(payCents, batch.feeBps) };
}
