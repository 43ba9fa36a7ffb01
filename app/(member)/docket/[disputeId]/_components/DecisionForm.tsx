"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { toast } from "sonner";
import { Button, ButtonLink } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { RadioCards } from "@/components/ui/RadioCards";
import { Sheet } from "@/components/ui/Sheet";
import { TextArea } from "@/components/ui/TextArea";
import { callJson } from "@/lib/http/callJson";

type Props = { disputeId: string; submissions: { id: string; label: string; instances: number }[] };

const REASON_MIN = 10;

/** Keep, pick one, or redraw; with a reason that everybody concerned will read. */
export function DecisionForm({ disputeId, submissions }: Props) {
  const router = useRouter();
  const [choice, setChoice] = useState("keep");
  const [reason, setReason] = useState("");
  const isLongEnough = reason.trim().length >= REASON_MIN;
  return (
    <Sheet title="Decide" id="decide">
      <div className="grid gap-5">
        <RadioCards
          label="The labels of this picture are"
          name="decision"
          value={choice}
          onValueChange={setChoice}
          options={[
            { value: "keep", title: "what was merged", text: "The agreement stands as it is." },
            ...submissions.map((submission) => ({
              value: submission.id,
              title: `what ${submission.label} drew`,
              text: `${submission.instances} instances, taken as they are.`,
            })),
            {
              value: "redraw",
              title: "drawn anew by you",
              text: "Opens the picture on the desk; you give the reason there.",
            },
          ]}
        />
        {choice === "redraw" ? (
          <ButtonLink kind="primary" href={`/redraw/${disputeId}`} className="justify-self-start">
            Open it on the desk
          </ButtonLink>
        ) : (
          <>
            <TextArea
              label="Reason"
              hint="Both sides read it; earlier decisions are cited from it."
              rows={4}
              maxLength={2000}
              value={reason}
              onChange={(event) => setReason(event.currentTarget.value)}
              error={reason !== "" && !isLongEnough ? "A sentence, please." : undefined}
            />
            <ConfirmDialog
              title="Decide so?"
              consequence="Pay of everybody on this picture is set right by linked postings, and all concerned get your reason by mail. A decision is not undone; it can be appealed."
              confirmLabel="Decide"
              trigger={
                <Button kind="primary" disabled={!isLongEnough} className="justify-self-start">
                  Decide
                </Button>
              }
              onConfirm={async () => {
                try {
                  const decision =
                    choice === "keep"
                      ? { outcome: "keep", reason }
                      : { outcome: "pick", submissionId: choice, reason };
                  await callJson("POST", `/api/disputes/${disputeId}/decision`, decision);
                } catch (error) {
                  return error instanceof Error ? error.message : "That did not work.";
                }
                toast.success("Decided.");
                router.refresh();
              }}
            />
          </>
        )}
      </div>
    </Sheet>
  );
}
