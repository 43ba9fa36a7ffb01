import { z } from "zod";
import { DeskDocument } from "./desk";

export const ClaimParams = z.object({ claimId: z.string().min(5).max(40) });
export const SubmissionParams = z.object({ submissionId: z.string().min(5).max(40) });
export const DisputeParams = z.object({ disputeId: z.string().min(5).max(40) });

/** Asks for work: any image of a batch, or the one that was lost when a claim ran out. */
export const ClaimInput = z.object({ batchId: z.string(), imageId: z.string().optional() });

export const DraftInput = z.object({ document: DeskDocument, version: z.int().min(0) });

export const SubmitInput = z.object({ document: DeskDocument, activeSeconds: z.number().min(0).max(86_400) });

const Reason = z
  .string()
  .trim()
  .min(10, "Say in a sentence what is wrong; the admin decides on it.")
  .max(2000, "2,000 characters at most.");

/** What can be wrong, as whoever contests says it. "disagreement" is kept for pictures that split. */
const ErrorKindSchema = z.enum(["outline", "class", "missing", "extra", "brief", "broken", "other"]);

const About = { reason: Reason, errorKind: ErrorKindSchema, classId: z.string().nullable() };

export const ContestScoreInput = z.object({ submissionId: z.string(), ...About });
export type ContestScoreInput = z.output<typeof ContestScoreInput>;
export const ContestImageInput = z.object({ imageId: z.string(), ...About });
export const AppealInput = z.object({ disputeId: z.string(), reason: Reason });

/** Earlier decisions that this one follows. */
const CitedIds = z.array(z.string().min(5).max(40)).max(10).optional();
const Because = { reason: Reason, citedIds: CitedIds };

export const DecideInput = z.discriminatedUnion("outcome", [
  z.object({ outcome: z.literal("keep"), ...Because }),
  z.object({ outcome: z.literal("restore"), ...Because }),
  z.object({ outcome: z.literal("pick"), submissionId: z.string(), ...Because }),
  z.object({ outcome: z.literal("redraw"), document: DeskDocument, ...Because }),
  z.object({ outcome: z.literal("broken"), fault: z.enum(["brief", "picture", "product"]), ...Because }),
]);
export type DecideInput = z.output<typeof DecideInput>;

/** A second admin's answer to a proposal; `proposedAtMs` says which one was read. */
export const ConfirmInput = z.discriminatedUnion("verdict", [
  z.object({ verdict: z.literal("confirm"), proposedAtMs: z.int() }),
  z.object({ verdict: z.literal("send-back"), proposedAtMs: z.int(), reason: Reason }),
]);
export type ConfirmInput = z.output<typeof ConfirmInput>;
