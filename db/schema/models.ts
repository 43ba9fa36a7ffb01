import { index, integer, real, sqliteTable, text } from "drizzle-orm/sqlite-core";
import type { ExemplarModel } from "@/lib/proposals/exemplar";
import { batches } from "./batches";

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
    model: text("model", { mode: "json" }).$type<ExemplarModel>().notNull(),
    millis: integer("millis").notNull(),
    createdAtMs: integer("created_at_ms").notNull(),
  },
  (t) => [index("exemplar_models_batch").on(t.batchId, t.version)],
);
