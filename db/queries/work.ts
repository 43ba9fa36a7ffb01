import { and, asc, count, desc, eq, gt, gte, inArray, lt, ne, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import {
  batches,
  claims,
  consensusRuns,
  disputes,
  drafts,
  images,
  submissions,
  teams,
  users,
} from "@/db/schema";

export type ClaimRow = typeof claims.$inferSelect;
export type SubmissionRow = typeof submissions.$inferSelect;
export type RunRow = typeof consensusRuns.$inferSelect;
export type DisputeRow = typeof disputes.$inferSelect;

export function findClaim(db: Reader, claimId: string): ClaimRow | undefined {
  return db.select().from(claims).where(eq(claims.id, claimId)).get();
}

/** The annotator's live claims whose lease has not run out, newest first. */
export function listLiveClaims(db: Reader, annotatorId: string, nowMs: number): ClaimRow[] {
  return db
    .select()
    .from(claims)
    .where(
      and(eq(claims.annotatorId, annotatorId), eq(claims.status, "live"), gte(claims.expiresAtMs, nowMs)),
    )
    .orderBy(desc(claims.claimedAtMs))
    .all();
}

export function findDraft(db: Reader, claimId: string) {
  return db.select().from(drafts).where(eq(drafts.claimId, claimId)).get();
}

/** Slots of an image that are held or filled. */
export function listTakenSlots(db: Reader, imageId: string): number[] {
  return db
    .select({ slot: claims.slot })
    .from(claims)
    .where(and(eq(claims.imageId, imageId), inArray(claims.status, ["live", "submitted"])))
    .all()
    .map((row) => row.slot);
}

const heldOrFilled = sql`(select count(*) from claims c where c.image_id = ${images.id} and c.status in ('live', 'submitted'))`;

function openTo(annotatorId: string) {
  return and(
    eq(images.status, "ready"),
    inArray(images.consensusState, ["none", "short"]),
    sql`${heldOrFilled} < ${images.slotsWanted}`,
    sql`not exists (select 1 from claims c where c.image_id = ${images.id} and c.annotator_id = ${annotatorId} and c.status in ('live', 'submitted'))`,
  );
}

/**
 * The image of a batch that the annotator should draw next: one that lacks a person (short) first, then the
 * nearly complete, then in upload order. Images that the annotator gave back come last.
 */
export function findNextImage(db: Reader, batchId: string, annotatorId: string, imageId?: string) {
  const gaveBack = sql`exists (select 1 from claims c where c.image_id = ${images.id} and c.annotator_id = ${annotatorId} and c.status = 'released')`;
  return db
    .select()
    .from(images)
    .where(
      and(eq(images.batchId, batchId), imageId ? eq(images.id, imageId) : undefined, openTo(annotatorId)),
    )
    .orderBy(
      asc(gaveBack),
      desc(sql`${images.consensusState} = 'short'`),
      desc(heldOrFilled),
      asc(images.ordinal),
    )
    .limit(1)
    .get();
}

/** The open batches for an annotator, newest first, with how many images wait for this person. */
export function listBoard(db: Reader, annotatorId: string, acceptsSensitive: boolean) {
  const open = sql<number>`(select count(*) from ${images} where ${images.batchId} = ${batches.id} and ${openTo(annotatorId)})`;
  const mine = sql<number>`(select count(*) from ${submissions} where ${submissions.batchId} = ${batches.id} and ${submissions.annotatorId} = ${annotatorId})`;
  return db
    .select({ batch: batches, teamName: teams.name, openImages: open, mySubmissions: mine })
    .from(batches)
    .innerJoin(teams, eq(teams.id, batches.teamId))
    .where(and(eq(batches.status, "open"), acceptsSensitive ? undefined : eq(batches.sensitive, false)))
    .orderBy(desc(batches.openedAtMs))
    .limit(100)
    .all();
}

export type Measured = {
  tasks: number;
  medianSeconds: number | null;
  medianPayCents: number | null;
  hourlyCents: number | null;
  p10HourlyCents: number | null;
};

/**
 * What work on a batch measured so far: median active seconds and pay of one task, and the median and tenth
 * percentile of pay an hour, over the latest 2,000 paid submissions. Nulls where there are none.
 */
export function measureBatch(db: Reader, batchId: string): Measured {
  const rows = db
    .select({ seconds: submissions.activeSeconds, cents: submissions.payCents })
    .from(submissions)
    .where(
      and(
        eq(submissions.batchId, batchId),
        sql`${submissions.payCents} is not null`,
        gt(submissions.activeSeconds, 0),
      ),
    )
    .orderBy(desc(submissions.submittedAtMs))
    .limit(2000)
    .all();
  const quantile = (values: number[], share: number) => {
    const sorted = [...values].sort((a, b) => a - b);
    return sorted.length === 0
      ? null
      : (sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))] ?? null);
  };
  const hourly = rows.map((row) => ((row.cents ?? 0) / row.seconds) * 3600);
  return {
    tasks: rows.length,
    medianSeconds: quantile(
      rows.map((row) => row.seconds),
      0.5,
    ),
    medianPayCents: quantile(
      rows.map((row) => row.cents ?? 0),
      0.5,
    ),
    hourlyCents: quantile(hourly, 0.5),
    p10HourlyCents: quantile(hourly, 0.1),
  };
}

export function findSubmission(db: Reader, submissionId: string): SubmissionRow | undefined {
  return db.select().from(submissions).where(eq(submissions.id, submissionId)).get();
}

/** All submissions for an image, in the order they came. */
export function listSubmissionsOf(db: Reader, imageId: string): SubmissionRow[] {
  return db
    .select()
    .from(submissions)
    .where(eq(submissions.imageId, imageId))
    .orderBy(asc(submissions.submittedAtMs), asc(submissions.id))
    .all();
}

/** An annotator's work, newest first, with the image and batch it belongs to. */
export function listWorkOf(
  db: Reader,
  annotatorId: string,
  { limit, beforeMs }: { limit: number; beforeMs?: number },
) {
  return db
    .select({
      submission: submissions,
      fileName: images.fileName,
      consensusState: images.consensusState,
      batchTitle: batches.title,
      disputeWindowHours: batches.disputeWindowHours,
    })
    .from(submissions)
    .innerJoin(images, eq(images.id, submissions.imageId))
    .innerJoin(batches, eq(batches.id, submissions.batchId))
    .where(
      and(
        eq(submissions.annotatorId, annotatorId),
        beforeMs ? lt(submissions.submittedAtMs, beforeMs) : undefined,
      ),
    )
    .orderBy(desc(submissions.submittedAtMs), desc(submissions.id))
    .limit(limit)
    .all();
}

export function findRun(db: Reader, runId: string): RunRow | undefined {
  return db.select().from(consensusRuns).where(eq(consensusRuns.id, runId)).get();
}

/** Every run of an image, oldest first. */
export function listRuns(db: Reader, imageId: string): RunRow[] {
  return db
    .select()
    .from(consensusRuns)
    .where(eq(consensusRuns.imageId, imageId))
    .orderBy(asc(consensusRuns.createdAtMs), asc(consensusRuns.id))
    .all();
}

/** The current runs of a batch's images with their image, in upload order. */
export function listCurrentRuns(db: Reader, batchId: string) {
  return db
    .select({ run: consensusRuns, image: images })
    .from(images)
    .innerJoin(consensusRuns, eq(consensusRuns.id, images.currentRunId))
    .where(eq(images.batchId, batchId))
    .orderBy(asc(images.ordinal))
    .all();
}

/** The people who worked on a batch, with how much they handed in, their mean quality and pay. */
export function listAnnotatorsOf(db: Reader, batchId: string) {
  return db
    .select({
      annotatorId: submissions.annotatorId,
      name: users.name,
      submissions: count(),
      quality: sql<number | null>`avg(${submissions.quality})`,
      payCents: sql<number>`coalesce(sum(${submissions.payCents}), 0)`,
      seconds: sql<number>`sum(${submissions.activeSeconds})`,
    })
    .from(submissions)
    .innerJoin(users, eq(users.id, submissions.annotatorId))
    .where(eq(submissions.batchId, batchId))
    .groupBy(submissions.annotatorId)
    .orderBy(desc(count()), asc(users.name))
    .all();
}

export function findDispute(db: Reader, disputeId: string): DisputeRow | undefined {
  return db.select().from(disputes).where(eq(disputes.id, disputeId)).get();
}

/** The open dispute of an image that was opened first. */
export function findOpenDispute(db: Reader, imageId: string): DisputeRow | undefined {
  return db
    .select()
    .from(disputes)
    .where(and(eq(disputes.imageId, imageId), eq(disputes.status, "open")))
    .limit(1)
    .get();
}

const HOUR_MS = 3_600_000;

/**
 * The docket. Open disputes: overdue ones first, then by money at stake times the time waited (an hour is added,
 * so that money counts from the start), then the oldest. Decided ones: newest first.
 */
export function listDocket(db: Reader, status: "open" | "decided", nowMs: number, limit = 200) {
  const { dueAtMs, stakeCents, openedAtMs, decidedAtMs, id } = disputes;
  return db
    .select({
      dispute: disputes,
      fileName: images.fileName,
      batchTitle: batches.title,
      openerName: users.name,
    })
    .from(disputes)
    .innerJoin(images, eq(images.id, disputes.imageId))
    .innerJoin(batches, eq(batches.id, disputes.batchId))
    .leftJoin(users, eq(users.id, disputes.openedBy))
    .where(eq(disputes.status, status))
    .orderBy(
      ...(status === "open"
        ? [
            desc(sql`${dueAtMs} < ${nowMs}`),
            desc(sql`${stakeCents} * (${nowMs} - ${openedAtMs} + ${HOUR_MS})`),
            asc(openedAtMs),
            asc(id),
          ]
        : [desc(decidedAtMs), asc(id)]),
    )
    .limit(limit)
    .all();
}

/** Disputes of a batch, newest first. */
export function listDisputesOf(db: Reader, batchId: string): DisputeRow[] {
  return db
    .select()
    .from(disputes)
    .where(eq(disputes.batchId, batchId))
    .orderBy(desc(disputes.openedAtMs))
    .all();
}

/** What two disputes have in common. */
export type Likeness = "batch" | "class" | "error";

/**
 * Decided disputes like this one: of the same kind of error, class or batch. Those with the most in common
 * first, then the newest. Looks at all decided disputes; their number grows with decisions, not with work.
 */
export function listSimilarDecisions(
  db: Reader,
  dispute: DisputeRow,
  limit: number,
): { dispute: DisputeRow; fileName: string; alike: Likeness[] }[] {
  const sameBatch = sql<number>`(${disputes.batchId} = ${dispute.batchId})`;
  const sameError = sql<number>`(${disputes.errorKind} = ${dispute.errorKind})`;
  // Classes belong to one batch, so across batches they are compared by name.
  const nameOf = (id: unknown) => sql`(select lower(name) from classes where id = ${id})`;
  const sameClass = sql<number>`coalesce(${nameOf(disputes.classId)} = ${nameOf(dispute.classId)}, 0)`;
  const score = sql`${sameBatch} + 2 * ${sameError} + 2 * ${sameClass}`;
  return db
    .select({ dispute: disputes, fileName: images.fileName, sameBatch, sameError, sameClass })
    .from(disputes)
    .innerJoin(images, eq(images.id, disputes.imageId))
    .where(and(eq(disputes.status, "decided"), ne(disputes.id, dispute.id), sql`${score} > 0`))
    .orderBy(desc(score), desc(disputes.decidedAtMs), asc(disputes.id))
    .limit(limit)
    .all()
    .map(({ dispute: row, fileName, ...same }) => ({
      dispute: row,
      fileName,
      alike: [
        ...(same.sameError ? ["error" as const] : []),
        ...(same.sameClass ? ["class" as const] : []),
        ...(same.sameBatch ? ["batch" as const] : []),
      ],
    }));
}
