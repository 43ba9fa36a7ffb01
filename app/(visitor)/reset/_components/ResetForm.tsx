"use client";

import Link from "next/link";
import { useActionState } from "react";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { setNewPassword } from "../../actions";

export function ResetForm({ secret }: { secret: string }) {
  const [result, submit] = useActionState(setNewPassword, null);
  if (result?.ok) {
    return (
      <Notice live title="The password is set" action={<Link href="/sign-in">Sign in</Link>}>
        Sign in with it now.
      </Notice>
    );
  }
  return (
    <Sheet>
      <form action={submit} className="grid gap-4">
        {result && !result.fields.password ? (
          <Notice kind="danger" live>
            {result.message}
          </Notice>
        ) : null}
        <input type="hidden" name="secret" value={secret} />
        <TextInput
          label="New password"
          name="password"
          type="password"
          autoComplete="new-password"
          hint="Ten characters or more; a few words in a row are easy to remember."
          required
          error={result?.fields.password}
        />
        <SubmitButton className="justify-self-start">Set it</SubmitButton>
      </form>
    </Sheet>
  );
}
