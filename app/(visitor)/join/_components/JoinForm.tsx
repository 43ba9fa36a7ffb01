"use client";

import { useActionState, useState } from "react";
import { Notice } from "@/components/ui/Notice";
import { RadioCards } from "@/components/ui/RadioCards";
import { Sheet } from "@/components/ui/Sheet";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { join } from "../../actions";

/** Name, e-mail, what one comes for, and an optional password. */
export function JoinForm({ role: initialRole }: { role: "requester" | "annotator" | null }) {
  const [result, submit] = useActionState(join, null);
  const [role, setRole] = useState(initialRole ?? "");
  const [typed, setTyped] = useState({ name: "", email: "", teamName: "" });
  if (result?.ok) {
    return (
      <Notice live title="One more step: look in your mailbox">
        We sent a letter to {result.value.email}. Its link confirms the address and signs you in.
      </Notice>
    );
  }
  const errors = result?.fields ?? {};
  return (
    <Sheet>
      <form action={submit} className="grid gap-5">
        {result && !result.ok && Object.keys(errors).length === 0 ? (
          <Notice kind="danger" live>
            {result.message}
          </Notice>
        ) : null}
        <RadioCards
          label="What do you come for?"
          name="role"
          value={role}
          onValueChange={(value) => setRole(value as typeof role)}
          error={errors.role}
          options={[
            {
              value: "requester",
              title: "I need labels",
              text: "Post pictures, set quality and pay, download the agreed labels.",
            },
            {
              value: "annotator",
              title: "I draw labels",
              text: "See pay and time before you start, draw, and be paid for what agrees.",
            },
          ]}
        />
        <TextInput
          label="Name"
          name="name"
          autoComplete="name"
          required
          error={errors.name}
          value={typed.name}
          onChange={(event) => setTyped({ ...typed, name: event.currentTarget.value })}
        />
        <TextInput
          label="E-mail"
          name="email"
          type="email"
          autoComplete="email"
          required
          error={errors.email}
          value={typed.email}
          onChange={(event) => setTyped({ ...typed, email: event.currentTarget.value })}
        />
        {role === "requester" ? (
          <TextInput
            label="Team or organisation"
            name="teamName"
            optional
            hint="Colleagues that you invite share its batches."
            autoComplete="organization"
            value={typed.teamName}
            onChange={(event) => setTyped({ ...typed, teamName: event.currentTarget.value })}
          />
        ) : null}
        <TextInput
          label="Password"
          name="password"
          type="password"
          autoComplete="new-password"
          optional
          hint="Ten characters or more. Leave it empty to sign in by mail links only."
          error={errors.password}
        />
        <SubmitButton className="justify-self-start">Create the account</SubmitButton>
      </form>
    </Sheet>
  );
}
