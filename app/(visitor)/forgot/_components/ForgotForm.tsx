"use client";

import { useActionState } from "react";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { mailResetLink } from "../../actions";

export function ForgotForm() {
  const [result, submit] = useActionState(mailResetLink, null);
  if (result?.ok) {
    return (
      <Notice live title="Look in your mailbox">
        If {result.value.email} has an account, a link is on its way.
      </Notice>
    );
  }
  return (
    <Sheet>
      <form action={submit} className="grid gap-4">
        <TextInput
          label="E-mail"
          name="email"
          type="email"
          autoComplete="email"
          required
          error={result ? (result.fields.email ?? result.message) : undefined}
        />
        <SubmitButton className="justify-self-start">Send the link</SubmitButton>
      </form>
    </Sheet>
  );
}
