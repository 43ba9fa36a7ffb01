import { sql } from "drizzle-orm";
import { index, integer, real, sqliteTable, text, uniqueIndex } from "drizzle-orm/sqlite-core";
import type { ImageConsensus } from "@/lib/consensus/types";
import type { DeskDocument } from "@/lib/contracts/desk";
import { batches, images } from "./batches";
import { users } from "./people";

export const claims = sqliteTable(
  "claims",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    imageId: text("image_id")
      .notNull()
      .references(() => images.id),
    annotatorId: text("annotator_id")
      .notNull()
      .references(() => users.id),
    slot: integer("slot").notNull(), // 1..kMax
    status: text("status", { enum: ["live", "submitted", "released", "expired"] }).notNull(),
    /** The brief that was shown when the claim was made: a dispute is judged by it. */
    briefVersion: integer("brief_version").notNull(),
    claimedAtMs: integer("claimed_at_ms").notNull(),
    heartbeatAtMs: integer("heartbeat_at_ms").notNull(),
    expiresAtMs: integer("expires_at_ms").notNull(),
    endedAtMs: integer("ended_at_ms"),
  },
  (t) => [
    uniqueIndex("claims_slot")
      .on(t.imageId, t.slot)
      .where(sql`status in ('live', 'submitted')`),
    uniqueIndex("claims_person")
      .on(t.imageId, t.annotatorId)
      .where(sql`status in ('live', 'submitted')`),
    index("claims_annotator").on(t.annotatorId, t.status),
    index("claims_expiry").on(t.status, t.expiresAtMs),
    index("claims_batch").on(t.batchId, t.status),
  ],
);

export const drafts = sqliteTable("drafts", {
  claimId: text("claim_id")
    .primaryKey()
    .references(() => claims.id),
  version: integer("version").notNull(),
  document: text("document", { mode: "json" }).$type<DeskDocument>().notNull(),
  savedAtMs: integer("saved_at_ms").notNull(),
});

export const submissions = sqliteTable(
  "submissions",
  {
    id: text("id").primaryKey(),
    claimId: text("claim_id")
      .notNull()
      .unique()
      .references(() => claims.id),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    imageId: text("image_id")
      .notNull()
      .references(() => images.id),
    annotatorId: text("annotator_id")
      .notNull()
      .references(() => users.id),
    document: text("document", { mode: "json" }).$type<DeskDocument>().notNull(),
    /** SHA-256 of the document as stored, hex. */
    sha256: text("sha256").notNull(),
    activeSeconds: real("active_seconds").notNull(),
    submittedAtMs: integer("submitted_at_ms").notNull(),
    /** What the current consensus run says of it; null until the image is settled. */
    scoredRunId: text("scored_run_id"),
    quality: real("quality"),
    payCents: integer("pay_cents"),
    feeCents: integer("fee_cents"),
    paidAtMs: integer("paid_at_ms"),
  },
  (t) => [
    index("submissions_image").on(t.imageId),
    index("submissions_annotator").on(t.annotatorId, t.submittedAtMs),
    index("submissions_batch").on(t.batchId, t.submittedAtMs),
  ],
);

/** One consensus of one image: by the engine, or by an admin's decision. Never changed, only superseded. */
export const consensusRuns = sqliteTable(
  "consensus_runs",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    imageId: text("image_id")
      .notNull()
      .references(() => images.id),
    origin: text("origin", { enum: ["engine", "decision"] }).notNull(),
    disputeId: text("dispute_id"),
    verdict: text("verdict", { enum: ["settled", "short", "split"] }).notNull(),
    agreement: real("agreement").notNull(),
    predictedIou: real("predicted_iou").notNull(),
    submissionIds: text("submission_ids", { mode: "json" }).$type<string[]>().notNull(),
    settings: text("settings", { mode: "json" }).$type<Record<string, unknown>>().notNull(),
    result: text("result", { mode: "json" }).$type<ImageConsensus>().notNull(),
    millis: integer("millis").notNull(),
    createdAtMs: integer("created_at_ms").notNull(),
  },
  (t) => [
    index("consensus_runs_image").on(t.imageId, t.createdAtMs),
    index("consensus_runs_batch").on(t.batchId, t.createdAtMs),
  ],
);

export type DisputeDecision =
  | { outcome: "keep" }
  | { outcome: "pick"; submissionId: string }
  | { outcome: "redraw"; document: DeskDocument };

export const disputes = sqliteTable(
  "disputes",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    imageId: text("image_id")
      .notNull()
      .references(() => images.id),
    /** The contested submission; null when the whole image is contested. */
    submissionId: text("submission_id").references(() => submissions.id),
    /** What is contested: the submission's id, else the image's. At most one open dispute a subject. */
    subject: text("subject").notNull(),
    kind: text("kind", { enum: ["score", "image", "split"] }).notNull(),
    openedBy: text("opened_by").references(() => users.id), // null: by itself
    reason: text("reason").notNull(),
    status: text("status", { enum: ["open", "decided", "withdrawn"] }).notNull(),
    /** Frozen when it opens: run, submissions, brief version, settings, timing. */
    evidence: text("evidence", { mode: "json" }).$type<Record<string, unknown>>().notNull(),
    stakeCents: integer("stake_cents").notNull(),
    openedAtMs: integer("opened_at_ms").notNull(),
    dueAtMs: integer("due_at_ms").notNull(),
    decision: text("decision", { mode: "json" }).$type<DisputeDecision>(),
    decisionReason: text("decision_reason"),
    decidedBy: text("decided_by").references(() => users.id),
    decidedAtMs: integer("decided_at_ms"),
    /** Money moved by the decision, from escrow's view: positive was paid out in addition. */
    movedCents: integer("moved_cents"),
  },
  (t) => [
    index("disputes_docket").on(t.status, t.dueAtMs),
    index("disputes_image").on(t.imageId),
    uniqueIndex("disputes_one_open")
      .on(t.subject)
      .where(sql`status = 'open'`),
  ],
);
