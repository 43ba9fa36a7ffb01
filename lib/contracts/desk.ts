import { z } from "zod";
import type { Shape } from "@/lib/geometry/types";

const Point = z.tuple([z.number(), z.number()]);
const Box = z.tuple([z.number(), z.number(), z.number().positive(), z.number().positive()]);

/** A box, or a region bounded by rings under the even-odd rule, in px of the upright original image. */
export const ShapeSchema: z.ZodType<Shape> = z.discriminatedUnion("kind", [
  z.object({ kind: z.literal("box"), box: Box }),
  z.object({ kind: z.literal("polygon"), rings: z.array(z.array(Point).min(3).max(20_000)).min(1).max(200) }),
]);

export const DeskInstance = z.object({
  id: z.string().min(1).max(60),
  classId: z.string().min(1).max(60),
  shape: ShapeSchema,
  origin: z.enum(["drawn", "taken", "adjusted"]),
  proposalId: z.string().max(60).nullable(),
  crowd: z.boolean(),
  occluded: z.boolean(),
  truncated: z.boolean(),
  note: z.string().max(500),
});
export type DeskInstance = z.output<typeof DeskInstance>;

/** What is drawn on one image, and the proposals that were sent away. */
export const DeskDocument = z.object({
  instances: z.array(DeskInstance).max(2000),
  dismissedProposalIds: z.array(z.string().max(60)).max(5000),
});
export type DeskDocument = z.output<typeof DeskDocument>;

export const DeskClass = z.object({
  id: z.string(),
  number: z.int(),
  name: z.string(),
  colour: z.string(),
  geometry: z.enum(["box", "polygon"]),
});
export type DeskClass = z.output<typeof DeskClass>;

export const DeskProposal = z.object({
  id: z.string(),
  classId: z.string().nullable(),
  shape: ShapeSchema,
  score: z.number(),
});
export type DeskProposal = z.output<typeof DeskProposal>;

/** How the tray chooses among proposals. */
export const Dealing = z.object({
  /** Of the proposals that people of the batch keep, the share that they adjust; 0..1. */
  adjustedShare: z.number().min(0).max(1),
  /** So many of the best are dealt even where no score promises to save time, until acceptance is measured. */
  firstFew: z.int().min(0),
});
export type Dealing = z.output<typeof Dealing>;

/** Everything that the desk needs to open one image. */
export const DeskTask = z.object({
  claimId: z.string(),
  batchTitle: z.string(),
  imageName: z.string(),
  imageUrl: z.string(),
  width: z.int(),
  height: z.int(),
  classes: z.array(DeskClass),
  proposals: z.array(DeskProposal),
  dealing: Dealing,
  brief: z.object({
    version: z.int(),
    markdown: z.string(),
    examples: z.array(z.object({ url: z.string(), caption: z.string() })),
  }),
  pay: z.object({ baseCents: z.int(), boxCents: z.int(), polygonCents: z.int(), capCents: z.int() }),
  medianSeconds: z.number().nullable(),
  expiresAtMs: z.number(),
  draft: DeskDocument.nullable(),
  draftVersion: z.int(),
  sensitive: z.boolean(),
});
export type DeskTask = z.output<typeof DeskTask>;
