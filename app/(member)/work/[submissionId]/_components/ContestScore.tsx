"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { TextArea } from "@/components/ui/TextArea";
import { When } from "@/components/ui/When";
import { contest } from "../../actions";

/** Puts the own score on the docket, with a reason. */
export function ContestScore({ submissionId, closesAtMs }: { submissionId: string; closesAtMs: number }) {
  const router = useRouter();
  const [reason, setReason] = useState("");
  return (
    <ConfirmDialog
      title="Contest this score?"
      consequence={
        <>
          An admin looks at your outlines, those of the others, and the brief as it was when you claimed the
          picture, and writes a reason for the decision. Contesting never counts against you. It is possible
          until <When at={closesAtMs} />.
        </>
      }
      confirmLabel="Contest it"
      trigger={<Button>Contest the score</Button>}
      onConfirm={async () => {
        const answer = await contest(null, { submissionId, reason });
        if (!answer.ok) return answer.message;
        toast.success("It is on the docket.");
        router.refresh();
      }}
    >
      <TextArea
        label="What is wrong with it?"
        rows={4}
        maxLength={2000}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}
