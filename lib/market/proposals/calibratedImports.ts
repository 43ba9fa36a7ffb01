import type { Reader } from "@/db/client";
import type { ImageRow } from "@/db/queries/batches";
import { findImportedPredictions, listSettledImports } from "@/db/queries/proposals";
import { calibrationOf, judgeBySettled } from "@/lib/proposals/dealing";
import type { ImportedPrediction } from "@/lib/formats/importedResults";

const SETTLED_MAX = 40;
/** Predictions of one settled picture that are judged: what follows is hardly ever dealt. */
const JUDGED_AN_IMAGE = 100;

/**
 * The imported predictions of a picture with scores that are probabilities: Platt's line (1999), fitted on what the batch's
 * settled pictures say of the file's own predictions for them. Before any is settled the scores stay as the file has
 * them.
 */
export function calibratedImports(db: Reader, image: Pick<ImageRow, "id" | "batchId">): ImportedPrediction[] {
  const own = findImportedPredictions(db, image.id);
  if (!own) return [];
  const calibration = calibrationOf(
    listSettledImports(db, image.batchId, SETTLED_MAX).flatMap(({ predictions, result }) =>
      judgeBySettled(
        predictions.slice(0, JUDGED_AN_IMAGE).map(({ box, score }) => ({ box, score, source: "import" })),
        result.agreed.map(({ box }) => box),
      ),
    ),
  );
  return own.predictions.map((prediction) => ({
    ...prediction,
    score: calibration(prediction.score, "import"),
  }));
}
