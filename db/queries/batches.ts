import { and, asc, count, desc, eq, inArray, ne, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import {
  batches,
  briefExamples,
  briefVersions,
  claims,
  classes,
  consensusRuns,
  images,
  proposalSets,
  releases,
  submissions,
} from "@/db/schema";

export type BatchRow = typeof batches.$inferSelect;
export type ImageRow = typeof images.$inferSelect;
export type ClassRow = typeof classes.$inferSelect;
export type ReleaseRow = typeof releases.$inferSelect;

export function findBatch(db: Reader, batchId: string): BatchRow | undefined {
  return db.select().from(batches).where(eq(batches.id, batchId)).get();
}

/** The batches of some teams, newest first, with how far each is. */
export function listBatchesOf(db: Reader, teamIds: string[]) {
  if (teamIds.length === 0) return [];
  const rows = db
    .select()
    .from(batches)
    .where(inArray(batches.teamId, teamIds))
    .orderBy(desc(batches.createdAtMs), desc(batches.id))
    .limit(200)
    .all();
  const progress = progressOf(
    db,
    rows.map((row) => row.id),
  );
  return rows.map((row) => ({ ...row, progress: progress.get(row.id) ?? NO_PROGRESS }));
}

export type BatchProgress = {
  images: number;
  refused: number;
  settled: number;
  short: number;
  split: number;
  submissions: number;
  agreement: number | null;
};
const NO_PROGRESS: BatchProgress = {
  images: 0,
  refused: 0,
  settled: 0,
  short: 0,
  split: 0,
  submissions: 0,
  agreement: null,
};

/** Counts of images by state, submissions, and mean agreement of the settled, for each batch. */
export function progressOf(db: Reader, batchIds: string[]): Map<string, BatchProgress> {
  if (batchIds.length === 0) return new Map();
  const total = (condition: ReturnType<typeof sql>) =>
    sql<number>`coalesce(sum(case when ${condition} then 1 else 0 end), 0)`;
  const states = db
    .select({
      batchId: images.batchId,
      images: total(sql`${images.status} = 'ready'`),
      refused: total(sql`${images.status} = 'refused'`),
      settled: total(sql`${images.consensusState} = 'settled'`),
      short: total(sql`${images.consensusState} = 'short'`),
      split: total(sql`${images.consensusState} = 'split'`),
      agreement: sql<
        number | null
      >`avg(case when ${images.consensusState} = 'settled' then ${consensusRuns.agreement} end)`,
    })
    .from(images)
    .leftJoin(consensusRuns, eq(consensusRuns.id, images.currentRunId))
    .where(inArray(images.batchId, batchIds))
    .groupBy(images.batchId)
    .all();
  const handedIn = new Map(
    db
      .select({ batchId: submissions.batchId, count: count() })
      .from(submissions)
      .where(inArray(submissions.batchId, batchIds))
      .groupBy(submissions.batchId)
      .all()
      .map((row) => [row.batchId, row.count]),
  );
  return new Map(
    states.map(({ batchId, ...row }) => [batchId, { ...row, submissions: handedIn.get(batchId) ?? 0 }]),
  );
}

/** The key of a batch, by number. */
export function listClasses(db: Reader, batchId: string): ClassRow[] {
  return db.select().from(classes).where(eq(classes.batchId, batchId)).orderBy(asc(classes.number)).all();
}

/** One version of the brief, or the latest. */
export function findBrief(db: Reader, batchId: string, version?: number) {
  return db
    .select()
    .from(briefVersions)
    .where(
      and(
        eq(briefVersions.batchId, batchId),
        version === undefined ? undefined : eq(briefVersions.version, version),
      ),
    )
    .orderBy(desc(briefVersions.version))
    .limit(1)
    .get();
}

export function listBriefExamples(db: Reader, batchId: string) {
  return db
    .select()
    .from(briefExamples)
    .where(eq(briefExamples.batchId, batchId))
    .orderBy(asc(briefExamples.ordinal))
    .all();
}

export function findImage(db: Reader, imageId: string): ImageRow | undefined {
  return db.select().from(images).where(eq(images.id, imageId)).get();
}

export type ImageListRow = ImageRow & { submitted: number; agreement: number | null };

/** Images of a batch in upload order, from `offset`, with submissions counted. At most 1,000. */
export function listImages(
  db: Reader,
  batchId: string,
  { limit, offset = 0, state }: { limit: number; offset?: number; state?: ImageRow["consensusState"] },
): ImageListRow[] {
  const submitted = sql<number>`(select count(*) from ${submissions} where ${submissions.imageId} = ${images.id})`;
  return db
    .select({ image: images, submitted, agreement: consensusRuns.agreement })
    .from(images)
    .leftJoin(consensusRuns, eq(consensusRuns.id, images.currentRunId))
    .where(and(eq(images.batchId, batchId), state ? eq(images.consensusState, state) : undefined))
    .orderBy(asc(images.ordinal), asc(images.id))
    .limit(Math.min(limit, 1000))
    .offset(offset)
    .all()
    .map(({ image, ...rest }) => ({ ...image, ...rest }));
}

/** Images that were checked and can be drawn. */
export function countReadyImages(db: Reader, batchId: string): number {
  return (
    db
      .select({ count: count() })
      .from(images)
      .where(and(eq(images.batchId, batchId), eq(images.status, "ready")))
      .get()?.count ?? 0
  );
}

/** Images that are still on their way: announced, or being checked. */
export function countPendingImages(db: Reader, batchId: string): number {
  return (
    db
      .select({ count: count() })
      .from(images)
      .where(and(eq(images.batchId, batchId), inArray(images.status, ["awaiting", "checking"])))
      .get()?.count ?? 0
  );
}

/** Another image of the batch with the same bytes, that was not refused. */
export function findByHash(db: Reader, batchId: string, sha256: string): ImageRow | undefined {
  return db
    .select()
    .from(images)
    .where(and(eq(images.batchId, batchId), eq(images.sha256, sha256), ne(images.status, "refused")))
    .limit(1)
    .get();
}

export function findProposals(db: Reader, imageId: string) {
  return db.select().from(proposalSets).where(eq(proposalSets.imageId, imageId)).get();
}

export function listReleases(db: Reader, batchId: string): ReleaseRow[] {
  return db.select().from(releases).where(eq(releases.batchId, batchId)).orderBy(desc(releases.number)).all();
}

export function findRelease(db: Reader, releaseId: string): ReleaseRow | undefined {
  return db.select().from(releases).where(eq(releases.id, releaseId)).get();
}

/** Live claims and submissions on the images of a batch. */
export function countWork(db: Reader, batchId: string): { live: number; submitted: number } {
  const rows = db
    .select({ status: claims.status, count: count() })
    .from(claims)
    .where(and(eq(claims.batchId, batchId), inArray(claims.status, ["live", "submitted"])))
    .groupBy(claims.status)
    .all();
  const of = (status: string) => rows.find((row) => row.status === status)?.count ?? 0;
  return { live: of("live"), submitted: of("submitted") };
}
