"use client";

import { useActionState } from "react";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { joinTeam } from "../../actions";
import { EnterByLink } from "../../link/_components/EnterByLink";

export function InvitationForm({ secret, hasAccount }: { secret: string; hasAccount: boolean }) {
  const [result, submit] = useActionState(joinTeam, null);
  if (result?.ok) {
    return (
      <Sheet title="You are in the team">
        <EnterByLink secret={result.value.signInSecret} label="Go to its batches" />
      </Sheet>
    );
  }
  return (
    <Sheet>
      <form action={submit} className="grid gap-4">
        {result ? (
          <Notice kind="danger" live>
            {result.message}
          </Notice>
        ) : null}
        <input type="hidden" name="secret" value={secret} />
        {hasAccount ? null : <TextInput label="Your name" name="name" autoComplete="name" required />}
        <SubmitButton className="justify-self-start">Join the team</SubmitButton>
      </form>
    </Sheet>
  );
}
