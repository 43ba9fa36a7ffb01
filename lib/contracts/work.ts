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

export const ContestScoreInput = z.object({ submissionId: z.string(), reason: Reason });
export const ContestImageInput = z.object({ imageId: z.string(), reason: Reason });

export const DecideInput = z.discriminatedUnion("outcome", [
  z.object({ outcome: z.literal("keep"), reason: Reason }),
  z.object({ outcome: z.literal("pick"), submissionId: z.string(), reason: Reason }),
  z.object({ outcome: z.literal("redraw"), document: DeskDocument, reason: Reason }),
]);
export type DecideInput = z.output<typeof DecideInput>;
