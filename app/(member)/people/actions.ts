"use server";

import { revalidatePath } from "next/cache";
import { z } from "zod";
import { nowMs } from "@/lib/clock";
import { action } from "@/lib/http/action";
import { setSuspended } from "@/lib/market/people/team";

const Input = z.object({
  userId: z.string(),
  suspended: z.boolean(),
  reason: z.string().trim().min(10, "Give the reason in a sentence.").max(1000),
});

/** Suspends an account or lifts the suspension, with a reason for the audit log. */
export const suspend = action({ role: "admin", input: Input }, ({ actor, input }) => {
  setSuspended({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/people");
  return {};
});
