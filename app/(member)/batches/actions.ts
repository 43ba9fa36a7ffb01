"use server";

import { revalidatePath } from "next/cache";
import { redirect } from "next/navigation";
import { z } from "zod";
import { nowMs } from "@/lib/clock";
import {
  CreateBatchInput,
  KeyAndBriefInput,
  QualityAndPayInput,
  ReleaseInput,
} from "@/lib/contracts/batches";
import { ContestImageInput } from "@/lib/contracts/work";
import { action } from "@/lib/http/action";
import { closeBatch as close } from "@/lib/market/batches/closeBatch";
import { createBatch } from "@/lib/market/batches/createBatch";
import { saveKeyAndBrief, saveQualityAndPay, setAgreementTarget } from "@/lib/market/batches/editBatch";
import { publishBatch, setPaused } from "@/lib/market/batches/publishBatch";
import { contestImage } from "@/lib/market/disputes/openDispute";
import { requestRelease } from "@/lib/market/releases/requestRelease";
import { retryProposals } from "@/lib/market/images/retryProposals";

const Batch = z.object({ batchId: z.string() });

/** Makes a draft and goes to its first step. */
export const startBatch = action({ role: "requester", input: CreateBatchInput }, ({ actor, input }) => {
  const batchId = createBatch({ actor, nowMs: nowMs(), ...input });
  redirect(`/batches/${batchId}/setup/images`);
});

export const saveKey = action(
  { role: "requester", input: Batch.and(KeyAndBriefInput) },
  ({ actor, input }) => {
    const { batchId, ...rest } = input;
    saveKeyAndBrief({ actor, nowMs: nowMs(), batchId, input: rest });
    revalidatePath(`/batches/${batchId}`, "layout");
    return {};
  },
);

export const savePay = action(
  { role: "requester", input: Batch.and(QualityAndPayInput) },
  ({ actor, input }) => {
    const { batchId, ...rest } = input;
    saveQualityAndPay({ actor, nowMs: nowMs(), batchId, input: rest });
    revalidatePath(`/batches/${batchId}`, "layout");
    return {};
  },
);

const PublishInput = Batch.extend({
  versionSeen: z.coerce.number().int(),
  worstCentsSeen: z.coerce.number().int(),
});

/** Funds a draft from the wallet and opens it. */
export const fund = action({ role: "requester", input: PublishInput }, ({ actor, input }) => {
  publishBatch({ actor, nowMs: nowMs(), ...input });
  redirect(`/batches/${input.batchId}`);
});

export const pause = action(
  { role: "requester", input: Batch.extend({ paused: z.boolean() }) },
  ({ actor, input }) => {
    setPaused({ actor, nowMs: nowMs(), ...input });
    revalidatePath(`/batches/${input.batchId}`);
    return {};
  },
);

/** Ends a batch; what is unspent goes back to the wallet. */
export const closeBatch = action({ role: "requester", input: Batch }, ({ actor, input }) => {
  const outcome = close({ actor, nowMs: nowMs(), ...input });
  revalidatePath(`/batches/${input.batchId}`);
  return outcome;
});

export const changeTarget = action(
  { role: "requester", input: Batch.extend({ target: z.coerce.number().min(0.3).max(0.98) }) },
  ({ actor, input }) => {
    const outcome = setAgreementTarget({ actor, nowMs: nowMs(), ...input });
    revalidatePath(`/batches/${input.batchId}`);
    return outcome;
  },
);

export const contest = action({ role: "requester", input: ContestImageInput }, ({ actor, input }) => {
  const disputeId = contestImage({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/batches", "layout");
  return { disputeId };
});

export const buildRelease = action({ role: "requester", input: ReleaseInput }, ({ actor, input }) => {
  const releaseId = requestRelease({ actor, nowMs: nowMs(), ...input });
  revalidatePath(`/batches/${input.batchId}`);
  return { releaseId };
});

export const findAgain = action({ role: "requester", input: Batch }, ({ actor, input }) => ({
  queued: retryProposals({ actor, nowMs: nowMs(), ...input }),
}));
