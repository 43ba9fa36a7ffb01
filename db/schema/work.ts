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

/** What was wrong, in the words of who contests; a split picture comes by itself as a disagreement. */
export const ERROR_KINDS = [
  "outline",
  "class",
  "missing",
  "extra",
  "brief",
  "broken",
  "other",
  "disagreement",
] as const;
export type ErrorKind = (typeof ERROR_KINDS)[number];

/** Whose fault a broken task is: never the annotator's. */
export const FAULTS = ["brief", "picture", "product"] as const;
export type Fault = (typeof FAULTS)[number];

export type DisputeDecision =
  | { outcome: "keep" }
  | { outcome: "restore" }
  | { outcome: "pick"; submissionId: string }
  | { outcome: "redraw"; document: DeskDocument }
  | { outcome: "broken"; fault: Fault };

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
    errorKind: text("error_kind", { enum: ERROR_KINDS }).notNull().default("other"),
    /** The class of the key that it is about, where there is one. */
    classId: text("class_id"),
    /** The decided dispute whose decision is appealed. An appeal is a dispute of its own. */
    appealOf: text("appeal_of"),
    /** Which run and brief it is judged by; the whole evidence is in dispute_evidence. */
    evidence: text("evidence", { mode: "json" }).$type<Record<string, unknown>>().notNull(),
    stakeCents: integer("stake_cents").notNull(),
    openedAtMs: integer("opened_at_ms").notNull(),
    dueAtMs: integer("due_at_ms").notNull(),
    decision: text("decision", { mode: "json" }).$type<DisputeDecision>(),
    decisionReason: text("decision_reason"),
    decidedBy: text("decided_by").references(() => users.id),
    decidedAtMs: integer("decided_at_ms"),
    /** Above the money limit: what one admin proposes and another confirms or sends back. */
    proposal: text("proposal", { mode: "json" }).$type<DisputeDecision>(),
    proposalReason: text("proposal_reason"),
    proposedBy: text("proposed_by").references(() => users.id),
    proposedAtMs: integer("proposed_at_ms"),
    confirmedBy: text("confirmed_by").references(() => users.id),
    /** Earlier decisions that the decider cites. */
    citedIds: text("cited_ids", { mode: "json" }).$type<string[]>().notNull().default([]),
    /** Money moved by the decision, from escrow's view: positive was paid out in addition. */
    movedCents: integer("moved_cents"),
  },
  (t) => [
    index("disputes_docket").on(t.status, t.dueAtMs),
    index("disputes_image").on(t.imageId),
    uniqueIndex("disputes_one_open")
      .on(t.subject)
      .where(sql`status = 'open'`),
    uniqueIndex("disputes_one_appeal")
      .on(t.appealOf)
      .where(sql`status <> 'withdrawn'`),
  ],
);

/** The evidence as it was when the dispute opened: the exact text and its hash. A trigger refuses any change. */
export const disputeEvidence = sqliteTable("dispute_evidence", {
  disputeId: text("dispute_id")
    .primaryKey()
    .references(() => disputes.id),
  snapshot: text("snapshot").notNull(), // JSON, read as text so that the hash is of what is stored
  /** SHA-256 of the snapshot's UTF-8 bytes, hex. */
  sha256: text("sha256").notNull(),
  frozenAtMs: integer("frozen_at_ms").notNull(),
});

/** What happened to a dispute, in order. Only added to. */
export const disputeSteps = sqliteTable(
  "dispute_steps",
  {
    id: integer("id").primaryKey({ autoIncrement: true }),
    disputeId: text("dispute_id")
      .notNull()
      .references(() => disputes.id),
    kind: text("kind", {
      enum: ["opened", "proposed", "sent-back", "confirmed", "decided", "withdrawn", "appealed"],
    }).notNull(),
    actorId: text("actor_id").references(() => users.id), // null: the product itself
    reason: text("reason").notNull().default(""),
    atMs: integer("at_ms").notNull(),
  },
  (t) => [index("dispute_steps_dispute").on(t.disputeId, t.id)],
);
