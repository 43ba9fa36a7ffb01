"use server";

import { revalidatePath } from "next/cache";
import { z } from "zod";
import { nowMs } from "@/lib/clock";
import { PayoutScheduleInput } from "@/lib/contracts/payments";
import { action } from "@/lib/http/action";
import { setPayoutSchedule } from "@/lib/market/money/payoutSchedule";
import { requestPayout, startOnboarding } from "@/lib/market/money/payouts";

/** The address of the onboarding, made fresh: it works once. */
export const onboard = action({ role: "annotator", input: z.object({}) }, ({ actor }) =>
  startOnboarding({ actor, nowMs: nowMs() }),
);

/** Asks for everything that is payable. */
export const payOut = action({ role: "annotator", input: z.object({}) }, ({ actor }) => {
  const payout = requestPayout({ actor, nowMs: nowMs() });
  revalidatePath("/earnings");
  return payout;
});

/** Keeps the annotator's choice of when to be paid without asking. */
export const saveSchedule = action({ role: "annotator", input: PayoutScheduleInput }, ({ actor, input }) => {
  const next = setPayoutSchedule({ actor, nowMs: nowMs(), input });
  revalidatePath("/earnings");
  return next;
});
