"use client";

import { useRouter } from "next/navigation";
import { useState, type ReactNode } from "react";
import { toast } from "sonner";
import { ERROR_WORDS } from "@/components/disputes/words";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Select } from "@/components/ui/Select";
import { TextArea } from "@/components/ui/TextArea";
import type { ContestScoreInput } from "@/lib/contracts/work";
import type { ActionResult } from "@/lib/http/action";

export type KeyClass = { id: string; number: number; name: string };
type About = Omit<ContestScoreInput, "submissionId">;

type Props = {
  label: string;
  title: string;
  consequence: ReactNode;
  classes: readonly KeyClass[];
  send: (about: About) => Promise<ActionResult<unknown>>;
};

const ERRORS = ["outline", "class", "missing", "extra", "brief", "broken", "other"] as const;

/** Asks what kind of error it is, about which class, and why; then puts it on the docket. */
export function ContestDialog({ label, title, consequence, classes, send }: Props) {
  const router = useRouter();
  const [errorKind, setErrorKind] = useState<About["errorKind"]>("outline");
  const [classId, setClassId] = useState("");
  const [reason, setReason] = useState("");
  return (
    <ConfirmDialog
      title={title}
      consequence={consequence}
      confirmLabel="Contest it"
      trigger={<Button>{label}</Button>}
      onConfirm={async () => {
        const answer = await send({ errorKind, classId: classId || null, reason });
        if (!answer.ok) return answer.message;
        toast.success("It is on the docket.");
        router.refresh();
      }}
    >
      <div className="grid gap-4">
        <div className="grid gap-4 sm:grid-cols-2">
          <Select
            label="What is wrong"
            value={errorKind}
            onChange={(event) => {
              const chosen = ERRORS.find((kind) => kind === event.currentTarget.value);
              if (chosen) setErrorKind(chosen);
            }}
            options={ERRORS.map((value) => ({ value, label: ERROR_WORDS[value] }))}
          />
          <Select
            label="Class"
            optional
            value={classId}
            onChange={(event) => setClassId(event.currentTarget.value)}
            options={[
              { value: "", label: "no one class" },
              ...classes.map(({ id, number, name }) => ({ value: id, label: `${number} ${name}` })),
            ]}
          />
        </div>
        <TextArea
          label="Your reason"
          hint="A sentence or more. The other side reads it as well."
          rows={4}
          maxLength={2000}
          value={reason}
          onChange={(event) => setReason(event.currentTarget.value)}
        />
      </div>
    </ConfirmDialog>
  );
}
