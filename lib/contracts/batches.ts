import { z } from "zod";
import { EVERYDAY_LABELS } from "@/lib/proposals/everydayLabels";

export const BatchParams = z.object({ batchId: z.string().min(5).max(40) });
export const ImageParams = z.object({ imageId: z.string().min(5).max(40) });

const Title = z.string().trim().min(3, "Give the batch a title of 3 characters or more.").max(120);

export const CreateBatchInput = z.object({ teamId: z.string(), title: Title });

export const ClassInput = z.object({
  id: z.string().nullable().default(null), // null: new
  number: z.int().min(1).max(99),
  name: z.string().trim().min(1, "Name the class.").max(60),
  colour: z.string().regex(/^#[0-9a-f]{6}$/i),
  pattern: z.string().max(20),
  geometry: z.enum(["box", "polygon"]),
  /** What the detector of everyday things calls it, where the requester confirmed that. */
  detectorLabel: z.enum(EVERYDAY_LABELS).nullish(),
});
export type ClassInput = z.output<typeof ClassInput>;

/** Step two: the key and the brief. */
export const KeyAndBriefInput = z.object({
  title: Title,
  classes: z
    .array(ClassInput)
    .min(1, "Name at least one class.")
    .max(40, "40 classes at most.")
    .refine(
      (list) => new Set(list.map((c) => c.number)).size === list.length,
      "Two classes have the same number.",
    )
    .refine(
      (list) => new Set(list.map((c) => c.name.toLowerCase())).size === list.length,
      "Two classes have the same name.",
    ),
  brief: z.string().trim().min(1, "Write the brief: what counts, what does not.").max(20_000),
  examples: z.array(z.object({ imageId: z.string(), caption: z.string().trim().max(200) })).max(12),
  sensitive: z.boolean(),
  sensitiveNote: z.string().trim().max(300),
  safetyCritical: z.boolean(),
  versionSeen: z.int(),
});
export type KeyAndBriefInput = z.output<typeof KeyAndBriefInput>;

const cents = (max: number) => z.int("Whole cents.").min(0).max(max);

/** What the price is made of; the same fields feed the cost panel, the hold and the settlement. */
export const PayFields = z.object({
  baseCents: cents(10_000),
  boxCents: cents(10_000),
  polygonCents: cents(10_000),
  capCents: z.int().min(1, "The cap must be at least 1 cent.").max(100_000),
});

/** Step three: quality and pay. */
export const QualityAndPayInput = PayFields.extend({
  kMin: z.int().min(1, "At least one annotator.").max(9),
  kMax: z.int().min(1).max(9, "Nine annotators at most."),
  agreementTarget: z.number().min(0.3).max(0.98),
  expectedInstances: z.number().min(0.1).max(500),
  floorHourlyCents: cents(20_000),
  versionSeen: z.int(),
})
  .refine((v) => v.kMax >= v.kMin, { path: ["kMax"], message: "The most cannot be below the fewest." })
  .refine((v) => v.capCents >= v.baseCents, {
    path: ["capCents"],
    message: "The cap cannot be below the base.",
  });
export type QualityAndPayInput = z.output<typeof QualityAndPayInput>;

export const VersionSeen = z.object({ versionSeen: z.int() });

/** The file types that are taken, with the bytes they begin with checked after the upload. */
export const IMAGE_TYPES = ["image/jpeg", "image/png", "image/webp", "image/avif", "image/tiff"] as const;
export const IMAGE_BYTES_MAX = 50 * 1024 * 1024;
export const IMAGE_PIXELS_MAX = 50_000_000;
export const FILES_PER_DROP_MAX = 500;

export const PlanUploadsInput = z.object({
  files: z
    .array(
      z.object({
        name: z.string().min(1).max(255),
        byteSize: z.int().min(0),
        mediaType: z.string().max(100),
        sha256: z.string().regex(/^[0-9a-f]{64}$/),
      }),
    )
    .min(1)
    .max(FILES_PER_DROP_MAX),
});

/** What the browser is to do with one file. */
export const UploadPlan = z.discriminatedUnion("kind", [
  z.object({
    kind: z.literal("put"),
    imageId: z.string(),
    url: z.string(),
    headers: z.record(z.string(), z.string()),
  }),
  z.object({
    kind: z.literal("parts"),
    imageId: z.string(),
    partBytes: z.int(),
    parts: z.array(z.object({ number: z.int(), url: z.string() })),
    /** Parts that arrived before a reload. */
    present: z.array(z.object({ number: z.int(), etag: z.string() })),
  }),
  z.object({ kind: z.literal("duplicate"), imageId: z.string(), fileName: z.string() }),
  z.object({ kind: z.literal("refused"), reason: z.string() }),
]);
export type UploadPlan = z.output<typeof UploadPlan>;

export const UploadedInput = z.object({
  parts: z.array(z.object({ number: z.int().min(1).max(10_000), etag: z.string().max(200) })).default([]),
});

/** One image as the requester's pages list it. */
export const ImageView = z.object({
  id: z.string(),
  fileName: z.string(),
  byteSize: z.int(),
  status: z.enum(["awaiting", "checking", "ready", "refused"]),
  refusal: z.string().nullable(),
  width: z.int().nullable(),
  height: z.int().nullable(),
  proposalState: z.enum(["none", "queued", "done", "failed"]),
  consensusState: z.enum(["none", "settled", "short", "split", "void"]),
  slotsWanted: z.int(),
  submitted: z.int(),
  agreement: z.number().nullable(),
});
export type ImageView = z.output<typeof ImageView>;

/** Licences that a team can give the labels of a release, by SPDX identifier; "" states none. */
export const LICENCES = [
  "",
  "CC0-1.0",
  "CC-BY-4.0",
  "CC-BY-SA-4.0",
  "CC-BY-NC-4.0",
  "ODbL-1.0",
  "CDLA-Permissive-2.0",
] as const;

export const ReleaseInput = z
  .object({
    batchId: z.string().min(5).max(40),
    withPictures: z.boolean().default(false),
    coordinates: z.enum(["upright", "stored"]).default("upright"),
    licence: z.enum(LICENCES).default(""),
  })
  .refine((input) => !input.withPictures || input.coordinates === "upright", {
    path: ["coordinates"],
    message: "The pictures in a release are upright, so its coordinates must be too.",
  });

/** A COCO results file as text; images and classes are matched when it is read. */
export const ImportPredictionsInput = z.object({
  fileName: z.string().min(1).max(255),
  text: z.string().min(1, "The file is empty."),
});
/** Bytes of a results file that are taken. */
export const PREDICTIONS_BYTES_MAX = 24 * 1024 * 1024;

/** What became of a results file. */
export const PredictionImportView = z.object({
  fileName: z.string(),
  used: z.int(),
  pictures: z.int(),
  wrongCount: z.int(),
  wrong: z.array(z.object({ line: z.int(), reason: z.string() })),
});
export type PredictionImportView = z.output<typeof PredictionImportView>;
