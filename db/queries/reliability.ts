import { asc, desc, eq, inArray, sql, and } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { images, submissions } from "@/db/schema";
import type { ImageLabels } from "@/lib/consensus/types";

/**
 * Labels of the batch's images that have two submissions or more, latest images first, at most `limit`: what
 * the reliability of its annotators is estimated from.
 */
export function listReliabilityLabels(db: Reader, batchId: string, limit: number): ImageLabels[] {
  const latest = db
    .select({ imageId: submissions.imageId })
    .from(submissions)
    .where(eq(submissions.batchId, batchId))
    .groupBy(submissions.imageId)
    .having(sql`count(*) >= 2`)
    .orderBy(desc(sql`max(${submissions.submittedAtMs})`))
    .limit(limit)
    .all()
    .map((row) => row.imageId);
  if (latest.length === 0) return [];
  const rows = db
    .select({ image: images, annotatorId: submissions.annotatorId, document: submissions.document })
    .from(submissions)
    .innerJoin(images, eq(images.id, submissions.imageId))
    .where(and(eq(submissions.batchId, batchId), inArray(submissions.imageId, latest)))
    .orderBy(asc(submissions.submittedAtMs), asc(submissions.id))
    .all();
  const byImage = new Map<string, ImageLabels>();
  for (const { image, annotatorId, document } of rows) {
    const entry = { annotatorId, instances: document.instances };
    const known = byImage.get(image.id);
    byImage.set(image.id, {
      width: image.width ?? 0,
      height: image.height ?? 0,
      annotators: known ? [...known.annotators, entry] : [entry],
    });
  }
  return [...byImage.values()];
}
