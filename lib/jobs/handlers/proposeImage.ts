import { eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findImage, listClasses } from "@/db/queries/batches";
import { findLatestTraining, findModel } from "@/db/queries/models";
import { images, proposalSets, type StoredProposal } from "@/db/schema";
import { newId } from "@/lib/ids";
import { isDetectorOn, knownLabels } from "@/lib/market/proposals/detectorUse";
import { calibratedImports } from "@/lib/market/proposals/calibratedImports";
import { getObject } from "@/lib/services/store";
import { threads } from "../pool";
import type { ProposeTask, Proposed } from "../threads";
import type { Handler } from "./index";

/** Proposals kept for one image; the tray deals the best of them. */
const PROPOSALS_MAX = 60;

/**
 * Finds the proposals of one image on a thread and replaces the stored set. An image that people have begun
 * to draw keeps the set they were dealt.
 */
export const proposeImageJob: Handler<"image.propose"> = async ({ imageId }, { nowMs, progress }) => {
  const db = getDb();
  const image = findImage(db, imageId);
  if (!image || image.status !== "ready" || !image.workingKey) return;
  progress(0.1, "reading");
  const bytes = await getObject(image.workingKey);
  const model = findModel(db, image.batchId);
  const key = listClasses(db, image.batchId);
  const known = isDetectorOn(findLatestTraining(db, image.batchId)) ? knownLabels(key) : [];
  progress(0.3, "finding");
  const startMs = performance.now();
  const task: ProposeTask = {
    kind: "propose",
    bytes,
    limit: PROPOSALS_MAX,
    model: model?.model ?? null,
    known,
    isAllKnown: known.length === key.length,
    imported: calibratedImports(db, image),
  };
  const found = (await threads().run(task)) as Proposed[];
  const millis = Math.round(performance.now() - startMs);
  const proposals = found.map((proposal): StoredProposal => ({ id: newId("pps"), ...proposal }));
  inTransaction(db, (tx) => {
    const values = {
      imageId,
      batchId: image.batchId,
      model: [
        model ? `exemplars ${model.version}` : "any image",
        ...(known.length > 0 ? ["everyday detector"] : []),
        ...(task.imported.length > 0 ? ["imported"] : []),
      ].join(", "),
      proposals,
      millis,
      createdAtMs: nowMs(),
    };
    tx.insert(proposalSets)
      .values(values)
      .onConflictDoUpdate({ target: proposalSets.imageId, set: values })
      .run();
    tx.update(images).set({ proposalState: "done" }).where(eq(images.id, imageId)).run();
  });
};
