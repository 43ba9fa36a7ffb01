"use client";

import { useActionState } from "react";
import { Notice } from "@/components/ui/Notice";
import { Select } from "@/components/ui/Select";
import { Sheet } from "@/components/ui/Sheet";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { startBatch } from "../actions";

export function NewBatchForm({ teams }: { teams: { id: string; name: string }[] }) {
  const [result, submit] = useActionState(startBatch, null);
  const [first] = teams;
  return (
    <Sheet>
      <form action={submit} className="grid gap-5">
        {result && !result.ok && !result.fields.title ? (
          <Notice kind="danger" live>
            {result.message}
          </Notice>
        ) : null}
        <TextInput
          label="Title"
          name="title"
          hint="As annotators will see it on the board, for example “Wrack line, spring tide”."
          required
          maxLength={120}
          error={result && !result.ok ? result.fields.title : undefined}
        />
        {teams.length > 1 ? (
          <Select
            label="Team"
            name="teamId"
            options={teams.map((team) => ({ value: team.id, label: team.name }))}
          />
        ) : (
          <input type="hidden" name="teamId" value={first?.id ?? ""} />
        )}
        <SubmitButton className="justify-self-start">Go on to the pictures</SubmitButton>
      </form>
    </Sheet>
  );
}
