"use server";

import { revalidatePath } from "next/cache";
import { z } from "zod";
import { nowMs } from "@/lib/clock";
import { action } from "@/lib/http/action";
import { refundWallet } from "@/lib/market/money/refunds";
import { startTopUp } from "@/lib/market/money/topUp";

const TopUpInput = z.object({
  teamId: z.string(),
  amountCents: z.coerce.number("Write an amount.").int("Write an amount.").positive("Write an amount."),
  returnPath: z
    .string()
    .regex(/^\/(?![/\\])/)
    .max(300)
    .default("/wallet"),
});

/** Begins a card payment; the answer is the address of the payment page. */
export const topUp = action({ role: "requester", input: TopUpInput }, ({ actor, input }) =>
  startTopUp({ actor, nowMs: nowMs(), ...input }),
);

const RefundInput = z.object({ teamId: z.string(), amountCents: z.number().int().positive() });

/** Sends money of the wallet back to the card. */
export const refund = action({ role: "requester", input: RefundInput }, ({ actor, input }) => {
  const sentCents = refundWallet({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/wallet");
  return { sentCents };
});
