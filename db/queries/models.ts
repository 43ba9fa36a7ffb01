import { and, desc, eq } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { exemplarModels } from "@/db/schema";

export type ModelRow = typeof exemplarModels.$inferSelect;

/** The latest model of a batch that helps, or undefined. */
export function findModel(db: Reader, batchId: string): ModelRow | undefined {
  return db
    .select()
    .from(exemplarModels)
    .where(and(eq(exemplarModels.batchId, batchId), eq(exemplarModels.useful, true)))
    .orderBy(desc(exemplarModels.version))
    .limit(1)
    .get();
}

/** The latest training of a batch, useful or not. */
export function findLatestTraining(db: Reader, batchId: string): ModelRow | undefined {
  return db
    .select()
    .from(exemplarModels)
    .where(eq(exemplarModels.batchId, batchId))
    .orderBy(desc(exemplarModels.version))
    .limit(1)
    .get();
}
