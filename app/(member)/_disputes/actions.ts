"use server";

import { revalidatePath } from "next/cache";
import { nowMs } from "@/lib/clock";
import { AppealInput, DisputeParams } from "@/lib/contracts/work";
import { action } from "@/lib/http/action";
import { appealDecision } from "@/lib/market/disputes/appeal";
import { withdrawDispute } from "@/lib/market/disputes/openDispute";

const SIDES = ["annotator", "requester"] as const;

/** Either side appeals a decision. */
export const appeal = action({ role: SIDES, input: AppealInput }, ({ actor, input }) => {
  const disputeId = appealDecision({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/work", "layout");
  revalidatePath("/batches", "layout");
  return { disputeId };
});

/** Whoever opened a dispute takes it back while it is open. */
export const withdraw = action({ role: SIDES, input: DisputeParams }, ({ actor, input }) => {
  withdrawDispute({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/work", "layout");
  revalidatePath("/batches", "layout");
  return {};
});
