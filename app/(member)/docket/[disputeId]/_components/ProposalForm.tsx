"use client";

import { useRouter } from "next/navigation";
import { useState, type ReactNode } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Sheet } from "@/components/ui/Sheet";
import { TextArea } from "@/components/ui/TextArea";
import { callJson } from "@/lib/http/callJson";

type Props = {
  disputeId: string;
  proposedAtMs: number;
  isOwn: boolean;
  summary: string;
  children: ReactNode;
};

/** The second admin's answer to a proposal; whoever proposed can only take it back. */
export function ProposalForm({ disputeId, proposedAtMs, isOwn, summary, children }: Props) {
  const router = useRouter();
  const [reason, setReason] = useState("");

  async function answer(body: Record<string, unknown>, done: string): Promise<string | void> {
    try {
      await callJson("POST", `/api/disputes/${disputeId}/confirmation`, { proposedAtMs, ...body });
    } catch (error) {
      return error instanceof Error ? error.message : "That did not work.";
    }
    toast.success(done);
    router.refresh();
  }

  return (
    <Sheet title="A proposal waits" id="proposal" lead={summary}>
      {children}
      <div className="mt-5 flex flex-wrap gap-2">
        {isOwn ? null : (
          <ConfirmDialog
            title="Confirm this decision?"
            consequence="It takes effect at once: pay is set right by linked postings, and all concerned get the reason by mail."
            confirmLabel="Confirm"
            trigger={<Button kind="primary">Confirm it</Button>}
            onConfirm={() => answer({ verdict: "confirm" }, "Decided.")}
          />
        )}
        <ConfirmDialog
          title={isOwn ? "Take your proposal back?" : "Send it back?"}
          consequence="The dispute is open again for any admin who had no part in it. Nothing has moved."
          confirmLabel={isOwn ? "Take it back" : "Send it back"}
          trigger={<Button>{isOwn ? "Take it back" : "Send it back"}</Button>}
          onConfirm={() => answer({ verdict: "send-back", reason }, isOwn ? "Taken back." : "Sent back.")}
        >
          <TextArea
            label="Reason"
            hint="The other admins read it."
            rows={3}
            maxLength={2000}
            value={reason}
            onChange={(event) => setReason(event.currentTarget.value)}
          />
        </ConfirmDialog>
      </div>
    </Sheet>
  );
}
