import { eq } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { listClasses } from "@/db/queries/batches";
import { listNamedImages } from "@/db/queries/proposals";
import { importedPredictions, predictionImports } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { PredictionImportView } from "@/lib/contracts/batches";
import { AppError } from "@/lib/errors";
import { FormatError } from "@/lib/formats/dataset";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { readImportedResults, type ImportedResults, type ImportTarget } from "@/lib/formats/importedResults";
import { proposeAgain } from "./proposeAgain";

/** Wrong records that are kept by line; of the others only the count. */
const WRONG_KEPT = 200;

type By = { actor: Actor; nowMs: number; batchId: string };

/**
 * Takes the predictions of a requester's own model from a COCO results file, in place of those of an earlier file, and has
 * the pictures that nobody has begun looked at again so that they are mixed in. Wrong records are named by line and
 * left out; a file that cannot be read, or of which nothing fits, changes nothing.
 */
export function importPredictions({
  fileName,
  text,
  ...by
}: By & { fileName: string; text: string }): PredictionImportView {
  const { batchId, actor, nowMs } = by;
  return inTransaction(getDb(), (tx) => {
    requireOpenToImports(tx, by);
    const target: ImportTarget = {
      images: listNamedImages(tx, batchId).flatMap(({ id, fileName: name, width, height }) =>
        width !== null && height !== null ? [{ id, fileName: name, width, height }] : [],
      ),
      classes: listClasses(tx, batchId),
    };
    const results = read(text, target);
    if (results.used === 0) {
      const [first] = results.wrong;
      throw new AppError(
        "invalid",
        first
          ? `None of the ${results.wrong.length} predictions fits this batch. Line ${first.line}: ${first.reason}.`
          : "The file holds no predictions.",
      );
    }
    clear(tx, batchId);
    for (const [imageId, predictions] of results.byImage)
      tx.insert(importedPredictions).values({ imageId, batchId, predictions }).run();
    const row = {
      batchId,
      fileName,
      importedBy: actor.id,
      used: results.used,
      wrongCount: results.wrong.length,
      wrong: results.wrong.slice(0, WRONG_KEPT),
      createdAtMs: nowMs,
    };
    tx.insert(predictionImports).values(row).run();
    audit(tx, {
      actorId: actor.id,
      action: "predictions.imported",
      subject: batchId,
      detail: { fileName, used: row.used, wrong: row.wrongCount },
      nowMs,
    });
    proposeAgain(tx, { batchId, nowMs });
    const { used, wrongCount, wrong } = row;
    return { fileName, used, wrongCount, wrong, pictures: results.byImage.size };
  });
}

/** Forgets imported predictions; pictures that nobody has begun get proposals without them. */
export function removePredictions(by: By): void {
  const { batchId, actor, nowMs } = by;
  inTransaction(getDb(), (tx) => {
    requireOpenToImports(tx, by);
    clear(tx, batchId);
    audit(tx, { actorId: actor.id, action: "predictions.removed", subject: batchId, detail: {}, nowMs });
    proposeAgain(tx, { batchId, nowMs });
  });
}

function requireOpenToImports(tx: Tx, { actor, batchId }: By): void {
  const batch = requireBatch(tx, batchId, actor, "editor");
  if (batch.status === "closed") throw new AppError("conflict", "A closed batch takes no predictions.");
}

function read(text: string, target: ImportTarget): ImportedResults {
  try {
    return readImportedResults(text, target);
  } catch (cause) {
    if (cause instanceof FormatError)
      throw new AppError(
        "invalid",
        cause.record === "" ? cause.reason : `The file cannot be read: ${cause.message}.`,
        { text: cause.message },
        { cause },
      );
    throw cause;
  }
}

function clear(tx: Tx, batchId: string): void {
  tx.delete(importedPredictions).where(eq(importedPredictions.batchId, batchId)).run();
  tx.delete(predictionImports).where(eq(predictionImports.batchId, batchId)).run();
}
