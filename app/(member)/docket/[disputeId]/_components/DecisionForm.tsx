"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { toast } from "sonner";
import { Button, ButtonLink } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { RadioCards } from "@/components/ui/RadioCards";
import { Sheet } from "@/components/ui/Sheet";
import { TextArea } from "@/components/ui/TextArea";
import { callJson } from "@/lib/http/callJson";

type Props = {
  disputeId: string;
  submissions: { id: string; label: string; instances: number }[];
  isAppeal: boolean;
  takesTwo: boolean;
  earlier: { id: string; label: string }[];
};

const REASON_MIN = 10;
const FAULTS = ["brief", "picture", "product"] as const;

/** Keep, go back, pick one, redraw or set aside; with a reason that everybody concerned will read. */
export function DecisionForm({ disputeId, submissions, isAppeal, takesTwo, earlier }: Props) {
  const router = useRouter();
  const [choice, setChoice] = useState("keep");
  const [fault, setFault] = useState<string>("brief");
  const [cited, setCited] = useState<readonly string[]>([]);
  const [reason, setReason] = useState("");
  const isLongEnough = reason.trim().length >= REASON_MIN;
  const verb = takesTwo ? "Propose" : "Decide";

  function decision() {
    const because = { reason, citedIds: cited };
    if (choice === "keep" || choice === "restore") return { outcome: choice, ...because };
    if (choice === "broken") return { outcome: choice, fault, ...because };
    return { outcome: "pick", submissionId: choice, ...because };
  }

  return (
    <Sheet
      title="Decide"
      id="decide"
      lead={
        takesTwo
          ? "So much is at stake that two admins must agree: you propose, another confirms or sends it back."
          : undefined
      }
    >
      <div className="grid gap-5">
        <RadioCards
          label="The labels of this picture are"
          name="decision"
          value={choice}
          onValueChange={setChoice}
          options={[
            {
              value: "keep",
              title: isAppeal ? "what the first decision says" : "what was merged",
              text: "Everything stands as it is.",
            },
            ...(isAppeal
              ? [
                  {
                    value: "restore",
                    title: "what was merged before the first decision",
                    text: "Scores and pay go back to it.",
                  },
                ]
              : []),
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
            {
              value: "broken",
              title: "none: the task was broken",
              text: "The picture is set aside. It counts against nobody, and the work on it is paid.",
            },
          ]}
        />
        {choice === "redraw" ? (
          <ButtonLink kind="primary" href={`/redraw/${disputeId}`} className="justify-self-start">
            Open it on the desk
          </ButtonLink>
        ) : (
          <>
            {choice === "broken" ? (
              <RadioCards
                label="At fault was"
                name="fault"
                columns={3}
                value={fault}
                onValueChange={setFault}
                options={FAULTS.map((value) => ({
                  value,
                  title: `the ${value}`,
                  text:
                    value === "product"
                      ? "The team gets the pay back from the platform."
                      : "The pay comes out of the batch.",
                }))}
              />
            ) : null}
            <TextArea
              label="Reason"
              hint="Both sides read it; later decisions can cite it."
              rows={4}
              maxLength={2000}
              value={reason}
              onChange={(event) => setReason(event.currentTarget.value)}
              error={reason !== "" && !isLongEnough ? "A sentence, please." : undefined}
            />
            {earlier.length > 0 ? (
              <fieldset className="grid gap-2">
                <legend className="mb-1 text-[0.95rem] font-semibold">It follows</legend>
                {earlier.map(({ id, label }) => (
                  <Checkbox
                    key={id}
                    label={label}
                    checked={cited.includes(id)}
                    onChange={(event) =>
                      setCited(
                        event.currentTarget.checked ? [...cited, id] : cited.filter((other) => other !== id),
                      )
                    }
                  />
                ))}
              </fieldset>
            ) : null}
            <ConfirmDialog
              title={takesTwo ? "Propose this?" : "Decide so?"}
              consequence={
                takesTwo
                  ? "Nothing moves yet. The other admins get your reason by mail, and one of them confirms it or sends it back."
                  : `Pay of everybody on this picture is set right by linked postings, and all concerned get your reason by mail. A decision is not undone; ${isAppeal ? "this one is final here" : "it can be appealed"}.`
              }
              confirmLabel={verb}
              trigger={
                <Button kind="primary" disabled={!isLongEnough} className="justify-self-start">
                  {verb}
                </Button>
              }
              onConfirm={async () => {
                try {
                  await callJson("POST", `/api/disputes/${disputeId}/decision`, decision());
                } catch (error) {
                  return error instanceof Error ? error.message : "That did not work.";
                }
                toast.success(takesTwo ? "Proposed." : "Decided.");
                router.refresh();
              }}
            />
          </>
        )}
      </div>
    </Sheet>
  );
}
