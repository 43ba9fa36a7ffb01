"use server";

import { revalidatePath } from "next/cache";
import { z } from "zod";
import { spendAllowance } from "@/lib/auth/limits";
import { nowMs } from "@/lib/clock";
import { InviteInput, MemberInput } from "@/lib/contracts/people";
import { action } from "@/lib/http/action";
import { changeMember, inviteColleague, revokeInvite } from "@/lib/market/people/team";

export const invite = action({ role: "requester", input: InviteInput }, async ({ actor, input }) => {
  await spendAllowance("mail", input.email);
  inviteColleague({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/team");
  return { email: input.email };
});

export const setMember = action({ role: "requester", input: MemberInput }, ({ actor, input }) => {
  changeMember({ actor, nowMs: nowMs(), ...input });
  revalidatePath("/team");
  return {};
});

export const revoke = action(
  { role: "requester", input: z.object({ inviteId: z.string() }) },
  ({ actor, input }) => {
    revokeInvite({ actor, nowMs: nowMs(), ...input });
    revalidatePath("/team");
    return {};
  },
);
