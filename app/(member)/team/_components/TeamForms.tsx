"use client";

import { useRouter } from "next/navigation";
import { useActionState, useState } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Notice } from "@/components/ui/Notice";
import { Select } from "@/components/ui/Select";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { invite, revoke, setMember } from "../actions";

const ROLES = [
  { value: "viewer", label: "viewer" },
  { value: "editor", label: "editor" },
  { value: "owner", label: "owner" },
];

export function InviteForm({ teamId }: { teamId: string }) {
  const [result, submit] = useActionState(invite, null);
  return (
    <form action={submit} className="grid gap-4">
      <h3 className="text-lg font-semibold">Invite a colleague</h3>
      {result?.ok ? <Notice live>An invitation is on its way to {result.value.email}.</Notice> : null}
      {result && !result.ok && !result.fields.email ? (
        <Notice kind="danger" live>
          {result.message}
        </Notice>
      ) : null}
      <input type="hidden" name="teamId" value={teamId} />
      <div className="grid items-start gap-4 sm:grid-cols-[1fr_10rem_auto]">
        <TextInput
          label="E-mail"
          name="email"
          type="email"
          required
          error={result && !result.ok ? result.fields.email : undefined}
        />
        <Select label="Role" name="role" defaultValue="editor" options={ROLES} />
        <SubmitButton kind="quiet" className="sm:mt-7">
          Invite
        </SubmitButton>
      </div>
    </form>
  );
}

type MemberProps = { teamId: string; userId: string; name: string; role: "owner" | "editor" | "viewer" };

/** Changes a member's role at once; removing asks first. */
export function MemberRole({ teamId, userId, name, role }: MemberProps) {
  const router = useRouter();
  const [asking, setAsking] = useState(false);
  async function change(next: "owner" | "editor" | "viewer" | "remove"): Promise<string | undefined> {
    const answer = await setMember(null, { teamId, userId, role: next });
    router.refresh();
    if (!answer.ok) return answer.message;
    toast.success(next === "remove" ? `${name} is out of the team.` : `${name} is ${next} now.`);
    return undefined;
  }
  return (
    <>
      <Select
        label={`Role of ${name}`}
        labelHidden
        value={role}
        options={[...ROLES, { value: "remove", label: "remove ..." }]}
        onChange={async (event) => {
          const next = event.currentTarget.value as "owner" | "editor" | "viewer" | "remove";
          if (next === "remove") return setAsking(true);
          const problem = await change(next);
          if (problem) toast.error(problem);
        }}
      />
      <ConfirmDialog
        title={`Remove ${name}?`}
        consequence="They lose sight of the team's batches at once. You can invite them again."
        kind="danger"
        confirmLabel="Remove"
        open={asking}
        onOpenChange={setAsking}
        onConfirm={() => change("remove")}
      />
    </>
  );
}

export function RevokeButton({ inviteId, email }: { inviteId: string; email: string }) {
  const router = useRouter();
  return (
    <Button
      size="small"
      aria-label={`Withdraw the invitation of ${email}`}
      onClick={async () => {
        const answer = await revoke(null, { inviteId });
        if (!answer.ok) toast.error(answer.message);
        router.refresh();
      }}
    >
      Withdraw
    </Button>
  );
}
