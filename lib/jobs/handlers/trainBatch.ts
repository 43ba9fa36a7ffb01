import { getDb, inTransaction } from "@/db/client";
import { listClasses } from "@/db/queries/batches";
import { findLatestTraining, findModel } from "@/db/queries/models";
import { listCurrentRuns } from "@/db/queries/work";
import { exemplarModels } from "@/db/schema";
import { newId } from "@/lib/ids";
import { proposeAgain } from "@/lib/market/proposals/proposeAgain";
import { isDetectorOn, knownLabels } from "@/lib/market/proposals/detectorUse";
import { getObject } from "@/lib/services/store";
import { threads } from "../pool";
import type { Trained, TrainTask } from "../threads";
import type { Handler } from "./index";

/** Counts of settled images after which the batch's proposals are learned anew. */
const TRAIN_AT = [1, 3, 5, 10, 20, 40, 80, 160];
const IMAGES_MAX = 24;
/** Only objects that two people or more support teach: one careless hand must not. */
const SUPPORT_MIN = 2;

/**
 * Learns from the batch's settled images when enough new ones are in, keeps the model with its measured
 * gain, and, where it helps, finds new proposals for the images that nobody has begun.
 */
export const trainBatchJob: Handler<"batch.train"> = async ({ batchId }, { nowMs, progress }) => {
  const db = getDb();
  const settled = listCurrentRuns(db, batchId).filter(({ image }) => image.consensusState === "settled");
  const last = findLatestTraining(db, batchId);
  const isDue = TRAIN_AT.some((mark) => settled.length >= mark && (last?.settledImages ?? 0) < mark);
  if (!isDue) return;
  const chosen = settled.slice(-IMAGES_MAX);
  const task: TrainTask = { kind: "train", images: [], known: knownLabels(listClasses(db, batchId)) };
  for (const [index, { run, image }] of chosen.entries()) {
    if (!image.workingKey) continue;
    progress((0.3 * index) / chosen.length, "reading");
    const instances = run.result.agreed
      .filter((instance) => run.origin === "decision" || instance.support >= SUPPORT_MIN)
      .map(({ classId, box, shape }) => ({
        classId,
        box,
        ...(shape.kind === "polygon" && { rings: shape.rings }),
      }));
    task.images.push({ bytes: await getObject(image.workingKey), instances });
  }
  progress(0.3, "learning");
  const startMs = performance.now();
  const { model, recall } = (await threads().run(task)) as Trained;
  const before = findModel(db, batchId);
  const row = {
    id: newId("mdl"),
    batchId,
    version: (last?.version ?? 0) + 1,
    settledImages: settled.length,
    instances: task.images.reduce((sum, entry) => sum + entry.instances.length, 0),
    useful: model.useful && (model.apWith ?? 0) >= (before?.apWith ?? 0) - 0.02,
    apWith: model.apWith,
    apWithout: model.apWithout,
    recallWithDetector: recall?.with ?? null,
    recallWithoutDetector: recall?.without ?? null,
    model,
    millis: Math.round(performance.now() - startMs),
    createdAtMs: nowMs(),
  };
  inTransaction(db, (tx) => {
    tx.insert(exemplarModels).values(row).run();
    const wasOn = isDetectorOn(last);
    const isChanged = isDetectorOn(row) !== wasOn && task.known.length > 0;
    if (row.useful || isChanged) proposeAgain(tx, { batchId, nowMs: nowMs() });
  });
};
