"use client";

import { useRouter } from "next/navigation";
import { useMemo, useState } from "react";
import { toast } from "sonner";
import { Desk } from "@/components/desk/Desk";
import type { DeskServices } from "@/components/desk/services";
import { Button } from "@/components/ui/Button";
import { Dialog } from "@/components/ui/Dialog";
import { Notice } from "@/components/ui/Notice";
import { TextArea } from "@/components/ui/TextArea";
import type { DeskDocument, DeskTask } from "@/lib/contracts/desk";
import { callJson } from "@/lib/http/callJson";

const REASON_MIN = 10;

/** The desk in its redraw mode: handing in asks for the reason and decides the dispute. */
export function RedrawDesk({ disputeId, task }: { disputeId: string; task: DeskTask }) {
  const router = useRouter();
  const [drawn, setDrawn] = useState<DeskDocument | null>(null);
  const [reason, setReason] = useState("");
  const [problem, setProblem] = useState<string | null>(null);
  const [pending, setPending] = useState(false);
  const services = useMemo((): DeskServices => {
    let version = 0;
    return {
      // The draft stays in this browser; nothing of a decision is stored before it is made.
      saveDraft: async () => ({ version: ++version }),
      heartbeat: async () => ({ expiresAtMs: Number.MAX_SAFE_INTEGER }),
      submit: async ({ document }) => setDrawn(document),
      release: async () => router.push(`/docket/${disputeId}`),
    };
  }, [disputeId, router]);

  async function decide(): Promise<void> {
    setPending(true);
    setProblem(null);
    try {
      const answer = await callJson<{ state: "decided" | "proposed" }>(
        "POST",
        `/api/disputes/${disputeId}/decision`,
        {
          outcome: "redraw",
          document: drawn,
          reason,
        },
      );
      toast.success(answer.state === "proposed" ? "Proposed. Another admin confirms it." : "Decided.");
      router.replace(`/docket/${disputeId}`);
    } catch (error) {
      setProblem(error instanceof Error ? error.message : "That did not work.");
      setPending(false);
    }
  }

  return (
    <>
      <Desk task={task} mode="redraw" services={services} />
      <Dialog
        title="The reason for this decision"
        description="Everybody concerned reads it. Pay is set right by linked postings."
        open={drawn !== null}
        onOpenChange={(open) => !open && setDrawn(null)}
        actions={
          <Button
            kind="primary"
            pending={pending}
            disabled={reason.trim().length < REASON_MIN}
            onClick={() => void decide()}
          >
            Decide
          </Button>
        }
      >
        {problem ? (
          <Notice kind="danger" live>
            {problem}
          </Notice>
        ) : null}
        <TextArea
          label="Reason"
          rows={4}
          maxLength={2000}
          value={reason}
          onChange={(event) => setReason(event.currentTarget.value)}
        />
      </Dialog>
    </>
  );
}
