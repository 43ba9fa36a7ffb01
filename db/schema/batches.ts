import { EVERYDAY_LABELS } from "@/lib/proposals/everydayLabels";
import { index, integer, real, sqliteTable, text, uniqueIndex } from "drizzle-orm/sqlite-core";
import { teams, users } from "./people";

export const BATCH_STATUSES = ["draft", "open", "paused", "closed"] as const;
export const IMAGE_STATUSES = ["awaiting", "checking", "ready", "refused"] as const;
/** `void`: a decision set the picture aside, because the brief, the picture or the product was at fault. */
export const CONSENSUS_STATES = ["none", "settled", "short", "split", "void"] as const;

export const batches = sqliteTable(
  "batches",
  {
    id: text("id").primaryKey(),
    teamId: text("team_id")
      .notNull()
      .references(() => teams.id),
    createdBy: text("created_by")
      .notNull()
      .references(() => users.id),
    title: text("title").notNull(),
    status: text("status", { enum: BATCH_STATUSES }).notNull().default("draft"),
    briefVersion: integer("brief_version").notNull().default(0),
    sensitive: integer("sensitive", { mode: "boolean" }).notNull().default(false),
    sensitiveNote: text("sensitive_note").notNull().default(""),
    safetyCritical: integer("safety_critical", { mode: "boolean" }).notNull().default(false),
    /** Annotators per image: from kMin to kMax. */
    kMin: integer("k_min").notNull().default(3),
    kMax: integer("k_max").notNull().default(5),
    /** Agreement in [0, 1] at which an image counts as settled. */
    agreementTarget: real("agreement_target").notNull().default(0.7),
    baseCents: integer("base_cents").notNull().default(5),
    boxCents: integer("box_cents").notNull().default(3),
    polygonCents: integer("polygon_cents").notNull().default(6),
    /** The most that one submission for one image can earn. */
    capCents: integer("cap_cents").notNull().default(120),
    feeBps: integer("fee_bps").notNull().default(1500),
    /** Below this measured hourly pay the product warns. */
    floorHourlyCents: integer("floor_hourly_cents").notNull().default(1200),
    /** The requester's guess of objects per image; measured values replace it once there are any. */
    expectedInstances: real("expected_instances").notNull().default(8),
    disputeWindowHours: integer("dispute_window_hours").notNull().default(72),
    /** Raised by each change: a stale form is a conflict. */
    version: integer("version").notNull().default(1),
    createdAtMs: integer("created_at_ms").notNull(),
    openedAtMs: integer("opened_at_ms"),
    closedAtMs: integer("closed_at_ms"),
  },
  (t) => [
    index("batches_team").on(t.teamId, t.createdAtMs),
    index("batches_status").on(t.status, t.openedAtMs),
  ],
);

export const briefVersions = sqliteTable(
  "brief_versions",
  {
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    version: integer("version").notNull(),
    markdown: text("markdown").notNull(),
    createdBy: text("created_by")
      .notNull()
      .references(() => users.id),
    createdAtMs: integer("created_at_ms").notNull(),
  },
  (t) => [uniqueIndex("brief_versions_key").on(t.batchId, t.version)],
);

export const briefExamples = sqliteTable(
  "brief_examples",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    /** An image of the batch shown as example. */
    imageId: text("image_id").notNull(),
    caption: text("caption").notNull().default(""),
    ordinal: integer("ordinal").notNull(),
  },
  (t) => [index("brief_examples_batch").on(t.batchId, t.ordinal)],
);

export const classes = sqliteTable(
  "classes",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    number: integer("number").notNull(),
    name: text("name").notNull(),
    colour: text("colour").notNull(), // #rrggbb of the published palette
    pattern: text("pattern").notNull().default("solid"),
    geometry: text("geometry", { enum: ["box", "polygon"] }).notNull(),
    /** What the detector of everyday things calls the class, confirmed by the requester; null: it does not know it. */
    detectorLabel: text("detector_label", { enum: EVERYDAY_LABELS }),
  },
  (t) => [
    uniqueIndex("classes_number").on(t.batchId, t.number),
    uniqueIndex("classes_name").on(t.batchId, t.name),
  ],
);

export const images = sqliteTable(
  "images",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    fileName: text("file_name").notNull(),
    byteSize: integer("byte_size").notNull(),
    /** SHA-256 of the bytes as uploaded, hex: said by the browser, verified by the check job. */
    sha256: text("sha256").notNull(),
    mediaType: text("media_type").notNull().default(""),
    status: text("status", { enum: IMAGE_STATUSES }).notNull().default("awaiting"),
    refusal: text("refusal"),
    uploadId: text("upload_id"), // S3 multipart upload under way
    originalKey: text("original_key").notNull(),
    workingKey: text("working_key"),
    thumbKey: text("thumb_key"),
    /** Upright size in px. */
    width: integer("width"),
    height: integer("height"),
    exifOrientation: integer("exif_orientation"),
    proposalState: text("proposal_state", { enum: ["none", "queued", "done", "failed"] })
      .notNull()
      .default("none"),
    consensusState: text("consensus_state", { enum: CONSENSUS_STATES }).notNull().default("none"),
    /** How many submissions the image wants now; rises from kMin to kMax while it is short. */
    slotsWanted: integer("slots_wanted").notNull().default(0),
    currentRunId: text("current_run_id"),
    ordinal: integer("ordinal").notNull(),
    createdAtMs: integer("created_at_ms").notNull(),
    settledAtMs: integer("settled_at_ms"),
  },
  (t) => [
    index("images_batch").on(t.batchId, t.ordinal),
    index("images_open").on(t.batchId, t.consensusState, t.status),
    index("images_hash").on(t.batchId, t.sha256),
  ],
);

export type StoredProposal = {
  id: string;
  classId: string | null;
  box: readonly [number, number, number, number];
  rings: ReadonlyArray<ReadonlyArray<readonly [number, number]>>;
  score: number;
  source: string;
};

/** The latest proposals of one image; a new run replaces the row. */
export const proposalSets = sqliteTable("proposal_sets", {
  imageId: text("image_id")
    .primaryKey()
    .references(() => images.id),
  batchId: text("batch_id")
    .notNull()
    .references(() => batches.id),
  model: text("model").notNull(),
  proposals: text("proposals", { mode: "json" }).$type<StoredProposal[]>().notNull(),
  millis: integer("millis").notNull(),
  createdAtMs: integer("created_at_ms").notNull(),
});

/** What the requester chose for a release. */
export type ReleaseOptions = {
  /** Whether the working copies (upright, without metadata) go in. */
  withPictures: boolean;
  /** Pixels of the upright picture, or of the file as uploaded before its EXIF orientation is applied. */
  coordinates: "upright" | "stored";
  /** SPDX identifier of the licence that the team gives its labels; empty where it states none. */
  licence: string;
};

export const releases = sqliteTable(
  "releases",
  {
    id: text("id").primaryKey(),
    batchId: text("batch_id")
      .notNull()
      .references(() => batches.id),
    number: integer("number").notNull(),
    status: text("status", { enum: ["building", "ready", "failed"] }).notNull(),
    options: text("options", { mode: "json" })
      .$type<ReleaseOptions>()
      .notNull()
      .default({ withPictures: false, coordinates: "upright", licence: "" }),
    requestedBy: text("requested_by")
      .notNull()
      .references(() => users.id),
    storageKey: text("storage_key"),
    sha256: text("sha256"),
    byteSize: integer("byte_size"),
    imageCount: integer("image_count"),
    instanceCount: integer("instance_count"),
    quality: text("quality", { mode: "json" }).$type<Record<string, unknown>>(),
    failure: text("failure"),
    createdAtMs: integer("created_at_ms").notNull(),
    readyAtMs: integer("ready_at_ms"),
  },
  (t) => [uniqueIndex("releases_number").on(t.batchId, t.number)],
);
