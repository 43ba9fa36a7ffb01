"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { TextArea } from "@/components/ui/TextArea";
import { When } from "@/components/ui/When";
import { appeal, withdraw } from "./actions";

/** Appeals a decision, with a reason. */
export function AppealDecision({ disputeId, closesAtMs }: { disputeId: string; closesAtMs: number }) {
  const router = useRouter();
  const [reason, setReason] = useState("");
  return (
    <ConfirmDialog
      title="Appeal this decision?"
      consequence={
        <>
          Another admin, who had no part in it, looks at everything anew. What that one decides is final here.
          Either side can appeal, once, until <When at={closesAtMs} />.
        </>
      }
      confirmLabel="Appeal"
      trigger={<Button>Appeal the decision</Button>}
      onConfirm={async () => {
        const answer = await appeal(null, { disputeId, reason });
        if (!answer.ok) return answer.message;
        toast.success("The appeal is on the docket.");
        router.refresh();
      }}
    >
      <TextArea
        label="What is wrong with the decision?"
        hint="A sentence or more. The other side reads it as well."
        rows={4}
        maxLength={2000}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}

/** Takes an own dispute back while nobody has decided it. */
export function WithdrawDispute({ disputeId, isAppeal }: { disputeId: string; isAppeal: boolean }) {
  const router = useRouter();
  return (
    <ConfirmDialog
      title={isAppeal ? "Take the appeal back?" : "Take it back?"}
      consequence={
        isAppeal
          ? "The first decision then stands, unless it is appealed again within its time."
          : "Everything stays as it is now. You can contest it again while the time for it runs."
      }
      confirmLabel="Take it back"
      trigger={<Button size="small">Take it back</Button>}
      onConfirm={async () => {
        const answer = await withdraw(null, { disputeId });
        if (!answer.ok) return answer.message;
        toast.success("Taken back.");
        router.refresh();
      }}
    />
  );
}
