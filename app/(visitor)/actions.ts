"use server";

import { nowMs } from "@/lib/clock";
import { spendAllowance } from "@/lib/auth/limits";
import { EmailInput, ResetInput, SignUpInput } from "@/lib/contracts/people";
import { action } from "@/lib/http/action";
import { resetPassword, sendResetLink } from "@/lib/market/people/account";
import { sendSignInLink } from "@/lib/market/people/signIn";
import { signUp } from "@/lib/market/people/signUp";
import { acceptInvitation } from "@/lib/market/people/team";
import { z } from "zod";

/** Makes an account; the answer is the same whether or not the address was taken. */
export const join = action({ role: "public", input: SignUpInput }, async ({ input }) => {
  await spendAllowance("mail", input.email);
  await signUp({ input, nowMs: nowMs() });
  return { email: input.email };
});

export const mailSignInLink = action({ role: "public", input: EmailInput }, async ({ input }) => {
  await spendAllowance("mail", input.email);
  sendSignInLink({ email: input.email, nowMs: nowMs() });
  return { email: input.email };
});

export const mailResetLink = action({ role: "public", input: EmailInput }, async ({ input }) => {
  await spendAllowance("mail", input.email);
  sendResetLink({ email: input.email, nowMs: nowMs() });
  return { email: input.email };
});

export const setNewPassword = action({ role: "public", input: ResetInput }, async ({ input }) => {
  await resetPassword({ ...input, nowMs: nowMs() });
  return {};
});

const AcceptInput = z.object({
  secret: z.string().min(20).max(100),
  name: z.string().trim().max(80).default(""),
});

/** Joins a team; the answer carries a one-time secret that signs the new colleague in. */
export const joinTeam = action({ role: "public", input: AcceptInput }, ({ input }) => ({
  signInSecret: acceptInvitation({ ...input, nowMs: nowMs() }),
}));
