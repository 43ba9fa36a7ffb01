import { index, integer, real, sqliteTable, text } from "drizzle-orm/sqlite-core";
import type { ExemplarModel } from "@/lib/proposals/exemplar";
import type { ImportedPrediction, WrongRecord } from "@/lib/formats/importedResults";
import { batches, images } from "./batches";
import { users } from "./people";

/** What a batch's own settled labels taught its proposals. One row a training; the latest useful one is used. */
export const exemplarModels = sqliteTable(
  "exemplar_models",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    version: integer("version").notNull(),
    settledImages: integer("settled_images").notNull(),
    instances: integer("instances").notNull(),
    /** Whether it beat what was there before on held-out settled images. */
    useful: integer("useful", { mode: "boolean" }).notNull(),
    /** Mean AP at IoU 0.5 on held-out settled images, of this model and without it; null if not measured. */
    apWith: real("ap_with"),
    apWithout: real("ap_without"),
    /**
     * Recall at IoU 0.5 with twice as many proposals as objects on the settled images, with and without the detector of
     * everyday things; null where no class of the key is matched to it.
     */
    recallWithDetector: real("recall_with_detector"),
    recallWithoutDetector: real("recall_without_detector"),
    model: text("model", { mode: "json" }).$type<ExemplarModel>().notNull(),
    millis: integer("millis").notNull(),
    createdAtMs: integer("created_at_ms").notNull(),
  },
  (t) => [index("exemplar_models_batch").on(t.batchId, t.version)],
);

/** The predictions of a requester's own model, as the latest file of the batch had them. */
export const predictionImports = sqliteTable("prediction_imports", {
  batchId: text("batch_id")
    .primaryKey()
    .references(() => batches.id),
  fileName: text("file_name").notNull(),
  importedBy: text("imported_by")
    .notNull()
    .references(() => users.id),
  used: integer("used").notNull(),
  wrongCount: integer("wrong_count").notNull(),
  /** The first wrong records with their lines. */
  wrong: text("wrong", { mode: "json" }).$type<WrongRecord[]>().notNull(),
  createdAtMs: integer("created_at_ms").notNull(),
});

export const importedPredictions = sqliteTable(
  "imported_predictions",
  {
    imageId: text("image_id")
      .primaryKey()
      .references(() => images.id),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    predictions: text("predictions", { mode: "json" }).$type<ImportedPrediction[]>().notNull(),
  },
  (t) => [index("imported_predictions_batch").on(t.batchId)],
);
