import { and, asc, desc, eq, inArray, ne } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { images, submissions } from "@/db/schema";
import type { ImageLabels } from "@/lib/consensus/types";

/** An image and the fingerprint of all that was handed in for it: it changes when a submission arrives, and only then. */
export type LabelStamp = { imageId: string; stamp: string };

/** Submissions looked at for each image wanted: bounds the work however long the batch has run. */
const SUBMISSIONS_PER_IMAGE = 10;

/**
 * The batch's images that have two submissions or more, latest first, at most `limit`: what the reliability of its
 * annotators is estimated from. Looks at the latest 10 x `limit` submissions, whatever the size of the batch.
 */
export function listLabelStamps(db: Reader, batchId: string, limit: number): LabelStamp[] {
  const latest = db
    .select({ imageId: submissions.imageId })
    .from(submissions)
    .innerJoin(images, eq(images.id, submissions.imageId))
    // A broken task never counts against anybody.
    .where(and(eq(submissions.batchId, batchId), ne(images.consensusState, "void")))
    .orderBy(desc(submissions.submittedAtMs), desc(submissions.id))
    .limit(SUBMISSIONS_PER_IMAGE * limit)
    .all();
  const imageIds = [...new Set(latest.map((row) => row.imageId))].slice(0, 2 * limit);
  if (imageIds.length === 0) return [];
  const parts = new Map<string, string[]>(imageIds.map((id) => [id, []]));
  for (const { imageId, id, sha256 } of db
    .select({ imageId: submissions.imageId, id: submissions.id, sha256: submissions.sha256 })
    .from(submissions)
    .where(inArray(submissions.imageId, imageIds))
    .orderBy(asc(submissions.submittedAtMs), asc(submissions.id))
    .all())
    parts.get(imageId)?.push(`${id}:${sha256}`);
  return [...parts]
    .filter(([, list]) => list.length >= 2)
    .slice(0, limit)
    .map(([imageId, list]) => ({ imageId, stamp: list.join() }));
}

/** What was handed in for these images, as the consensus engine takes it, by image. */
export function findLabelsOf(db: Reader, imageIds: readonly string[]): Map<string, ImageLabels> {
  const byImage = new Map<string, ImageLabels>();
  if (imageIds.length === 0) return byImage;
  const rows = db
    .select({
      imageId: images.id,
      width: images.width,
      height: images.height,
      annotatorId: submissions.annotatorId,
      document: submissions.document,
    })
    .from(submissions)
    .innerJoin(images, eq(images.id, submissions.imageId))
    .where(inArray(submissions.imageId, [...imageIds]))
    .orderBy(asc(submissions.submittedAtMs), asc(submissions.id))
    .all();
  for (const { imageId, width, height, annotatorId, document } of rows) {
    const entry = { annotatorId, instances: document.instances };
    const known = byImage.get(imageId);
    byImage.set(imageId, {
      width: width ?? 0,
      height: height ?? 0,
      annotators: known ? [...known.annotators, entry] : [entry],
    });
  }
  return byImage;
}
