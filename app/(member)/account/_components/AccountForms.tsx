"use client";

import { useActionState, useEffect } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Notice } from "@/components/ui/Notice";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { endSessions, saveAccount, savePassword } from "../actions";

export function AccountForm({
  name,
  acceptsSensitive,
  isAnnotator,
}: {
  name: string;
  acceptsSensitive: boolean;
  isAnnotator: boolean;
}) {
  const [result, submit] = useActionState(saveAccount, null);
  useEffect(() => {
    if (result?.ok) toast.success("Saved.");
  }, [result]);
  return (
    <form action={submit} className="grid gap-5">
      <TextInput
        label="Name"
        name="name"
        defaultValue={name}
        required
        error={result && !result.ok ? result.fields.name : undefined}
      />
      {isAnnotator ? (
        <Checkbox
          name="acceptsSensitive"
          label="Show me batches with sensitive content"
          hint="People, private places or distressing scenes. Each is flagged before the first picture, and you can give any picture back."
          defaultChecked={acceptsSensitive}
        />
      ) : null}
      <SubmitButton className="justify-self-start">Save</SubmitButton>
    </form>
  );
}

export function PasswordForm({ hasPassword }: { hasPassword: boolean }) {
  const [result, submit] = useActionState(savePassword, null);
  useEffect(() => {
    if (result?.ok) window.location.assign("/sign-in");
  }, [result]);
  return (
    <form action={submit} className="grid gap-5">
      {result && !result.ok && Object.keys(result.fields).length === 0 ? (
        <Notice kind="danger" live>
          {result.message}
        </Notice>
      ) : null}
      {hasPassword ? (
        <TextInput
          label="Current password"
          name="current"
          type="password"
          autoComplete="current-password"
          required
          error={result && !result.ok ? result.fields.current : undefined}
        />
      ) : null}
      <TextInput
        label="New password"
        name="password"
        type="password"
        autoComplete="new-password"
        hint="Ten characters or more."
        required
        error={result && !result.ok ? result.fields.password : undefined}
      />
      <SubmitButton className="justify-self-start">Set the password</SubmitButton>
    </form>
  );
}

export function EverywhereButton() {
  return (
    <ConfirmDialog
      title="Sign out everywhere?"
      consequence="Every session of your account ends, this one too."
      confirmLabel="Sign out everywhere"
      trigger={<Button>Sign out everywhere</Button>}
      onConfirm={async () => {
        const answer = await endSessions(null, {});
        if (!answer.ok) return answer.message;
        window.location.assign("/sign-in");
      }}
    />
  );
}
