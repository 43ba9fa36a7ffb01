"use server";

import { revalidatePath } from "next/cache";
import { z } from "zod";
import { nowMs } from "@/lib/clock";
import { AccountInput, PasswordInput } from "@/lib/contracts/people";
import { action } from "@/lib/http/action";
import { changePassword, signOutEverywhere, updateAccount } from "@/lib/market/people/account";

export const saveAccount = action({ role: "any", input: AccountInput }, ({ actor, input }) => {
  updateAccount({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/", "layout");
  return {};
});

export const savePassword = action({ role: "any", input: PasswordInput }, async ({ actor, input }) => {
  await changePassword({ actor, nowMs: nowMs(), ...input });
  return {};
});

export const endSessions = action({ role: "any", input: z.object({}) }, ({ actor }) => {
  signOutEverywhere({ actor, nowMs: nowMs() });
  return {};
});
