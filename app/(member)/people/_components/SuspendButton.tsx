"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { TextArea } from "@/components/ui/TextArea";
import { suspend } from "../actions";

export function SuspendButton({
  userId,
  name,
  isSuspended,
}: {
  userId: string;
  name: string;
  isSuspended: boolean;
}) {
  const router = useRouter();
  const [reason, setReason] = useState("");
  return (
    <ConfirmDialog
      title={isSuspended ? `Lift the suspension of ${name}?` : `Suspend ${name}?`}
      consequence={
        isSuspended
          ? "The account works again at once."
          : "All sessions end at once. Earned money stays theirs and is paid out; a person reviews an appeal."
      }
      kind={isSuspended ? "ordinary" : "danger"}
      confirmLabel={isSuspended ? "Lift it" : "Suspend"}
      trigger={
        <Button size="small" aria-label={`${isSuspended ? "Lift the suspension of" : "Suspend"} ${name}`}>
          {isSuspended ? "Lift" : "Suspend"}
        </Button>
      }
      onConfirm={async () => {
        const answer = await suspend(null, { userId, suspended: !isSuspended, reason });
        if (!answer.ok) return answer.message;
        router.refresh();
      }}
    >
      <TextArea
        label="Reason, for the audit log"
        rows={3}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}
