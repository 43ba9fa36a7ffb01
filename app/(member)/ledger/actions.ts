"use server";

import { revalidatePath } from "next/cache";
import { z } from "zod";
import { nowMs } from "@/lib/clock";
import { action } from "@/lib/http/action";
import { reconcile } from "@/lib/market/money/reconcile";

/** Compares the ledger with Stripe now. */
export const reconcileNow = action({ role: "admin", input: z.object({}) }, async () => {
  const outcome = await reconcile({ nowMs: nowMs() });
  revalidatePath("/ledger");
  return outcome;
});
