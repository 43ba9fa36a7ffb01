import type { BatchRow, ClassRow } from "@/db/queries/batches";
import type { DeskDocument } from "@/lib/contracts/desk";
import { feeFor, payFor } from "@/lib/ledger/pricing";

type Work = { document: DeskDocument; payCents: number | null };

/**
 * Pay for work on a task that the brief, the picture or the product broke: as if all that was drawn had been
 * agreed, up to the median count of instances that people drew on the picture (the upper one of two), never
 * above the cap and never less than was paid. The median keeps one who filled the picture from gaining by it.
 * The fee is 0 where the product was at fault. In the order of `list`. Pure.
 */
export function brokenPay(
  batch: BatchRow,
  key: readonly ClassRow[],
  list: readonly Work[],
  fault: "brief" | "picture" | "product",
): { payCents: number; feeCents: number }[] {
  const geometryOf = new Map(key.map((row) => [row.id, row.geometry]));
  const counts = list.map(({ document }) => document.instances.length).sort((a, b) => a - b);
  const countMax = counts[Math.floor(counts.length / 2)] ?? 0;
  return list.map(({ document, payCents }) => {
    const counted = document.instances.slice(0, countMax);
    const agreedPolygons = counted.filter(({ classId }) => geometryOf.get(classId) === "polygon").length;
    const work = { agreedBoxes: counted.length - agreedPolygons, agreedPolygons, goodFaith: true };
    const due = Math.max(payCents ?? 0, payFor(batch, work));
    return { payCents: due, feeCents: fault === "product" ? 0 : feeFor(due, batch.feeBps) };
  });
}
