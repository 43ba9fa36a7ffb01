"use server";

import { revalidatePath } from "next/cache";
import { nowMs } from "@/lib/clock";
import { ContestScoreInput } from "@/lib/contracts/work";
import { action } from "@/lib/http/action";
import { contestScore } from "@/lib/market/disputes/openDispute";

/** An annotator contests a score. */
export const contest = action({ role: "annotator", input: ContestScoreInput }, ({ actor, input }) => {
  const disputeId = contestScore({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/work", "layout");
  return { disputeId };
});
