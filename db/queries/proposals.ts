import { and, desc, eq, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import {
  consensusRuns,
  importedPredictions,
  images,
  predictionImports,
  proposalSets,
  submissions,
} from "@/db/schema";

/** What annotators did with the proposals of a batch, over all that was handed in. */
export type Acceptance = {
  submissions: number;
  takenBoxes: number;
  takenOutlines: number;
  adjustedBoxes: number;
  adjustedOutlines: number;
  dismissed: number;
  /** Shapes that were drawn without a proposal. */
  drawn: number;
};

/** Counts of proposals taken as they were, taken and adjusted, and sent away, and of shapes drawn by hand. */
export function countAcceptance(db: Reader, batchId: string): Acceptance {
  const counted = db.get<Omit<Acceptance, "dismissed" | "submissions">>(sql`
    select
      coalesce(sum(origin = 'taken' and kind = 'box'), 0) as takenBoxes,
      coalesce(sum(origin = 'taken' and kind <> 'box'), 0) as takenOutlines,
      coalesce(sum(origin = 'adjusted' and kind = 'box'), 0) as adjustedBoxes,
      coalesce(sum(origin = 'adjusted' and kind <> 'box'), 0) as adjustedOutlines,
      coalesce(sum(origin = 'drawn'), 0) as drawn
    from (
      select
        case when json_extract(i.value, '$.proposalId') is null then 'drawn'
             else json_extract(i.value, '$.origin') end as origin,
        json_extract(i.value, '$.shape.kind') as kind
      from ${submissions}, json_each(${submissions.document}, '$.instances') i
      where ${submissions.batchId} = ${batchId}
    )`);
  const total = db
    .select({
      submissions: sql<number>`count(*)`,
      dismissed: sql<number>`coalesce(sum(json_array_length(${submissions.document}, '$.dismissedProposalIds')), 0)`,
    })
    .from(submissions)
    .where(eq(submissions.batchId, batchId))
    .get();
  return {
    takenBoxes: counted?.takenBoxes ?? 0,
    takenOutlines: counted?.takenOutlines ?? 0,
    adjustedBoxes: counted?.adjustedBoxes ?? 0,
    adjustedOutlines: counted?.adjustedOutlines ?? 0,
    drawn: counted?.drawn ?? 0,
    submissions: total?.submissions ?? 0,
    dismissed: total?.dismissed ?? 0,
  };
}

/** The latest settled pictures of a batch that have proposals, with what was agreed on them; newest first, ties by id. */
export function listSettledProposals(db: Reader, batchId: string, limit: number) {
  return db
    .select({ proposals: proposalSets.proposals, result: consensusRuns.result })
    .from(images)
    .innerJoin(proposalSets, eq(proposalSets.imageId, images.id))
    .innerJoin(consensusRuns, eq(consensusRuns.id, images.currentRunId))
    .where(and(eq(images.batchId, batchId), eq(images.consensusState, "settled")))
    .orderBy(desc(images.settledAtMs), desc(images.id))
    .limit(limit)
    .all();
}

/** What the latest submissions of a batch say of the proposals that are still stored; newest first, ties by id. */
export function listProposalVerdicts(db: Reader, batchId: string, limit: number) {
  return db
    .select({ document: submissions.document, proposals: proposalSets.proposals })
    .from(submissions)
    .innerJoin(proposalSets, eq(proposalSets.imageId, submissions.imageId))
    .where(eq(submissions.batchId, batchId))
    .orderBy(desc(submissions.submittedAtMs), desc(submissions.id))
    .limit(limit)
    .all();
}

/** What became of the latest results file of a batch, with the number of pictures that it has predictions for. */
export function findPredictionImport(db: Reader, batchId: string) {
  const row = db.select().from(predictionImports).where(eq(predictionImports.batchId, batchId)).get();
  if (!row) return undefined;
  const pictures = db
    .select({ count: sql<number>`count(*)` })
    .from(importedPredictions)
    .where(eq(importedPredictions.batchId, batchId))
    .get();
  return { ...row, pictures: pictures?.count ?? 0 };
}

export function findImportedPredictions(db: Reader, imageId: string) {
  return db.select().from(importedPredictions).where(eq(importedPredictions.imageId, imageId)).get();
}

/** The latest settled pictures of a batch for which predictions were imported, with what was agreed; newest first, ties by id. */
export function listSettledImports(db: Reader, batchId: string, limit: number) {
  return db
    .select({ predictions: importedPredictions.predictions, result: consensusRuns.result })
    .from(images)
    .innerJoin(importedPredictions, eq(importedPredictions.imageId, images.id))
    .innerJoin(consensusRuns, eq(consensusRuns.id, images.currentRunId))
    .where(and(eq(images.batchId, batchId), eq(images.consensusState, "settled")))
    .orderBy(desc(images.settledAtMs), desc(images.id))
    .limit(limit)
    .all();
}

/** Ready pictures of a batch by name and size, in upload order. */
export function listNamedImages(db: Reader, batchId: string) {
  return db
    .select({ id: images.id, fileName: images.fileName, width: images.width, height: images.height })
    .from(images)
    .where(and(eq(images.batchId, batchId), eq(images.status, "ready")))
    .orderBy(images.ordinal, images.id)
    .all();
}
