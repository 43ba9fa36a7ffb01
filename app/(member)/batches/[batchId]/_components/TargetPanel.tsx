"use client";

import { useRouter } from "next/navigation";
import { useState, useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { Money } from "@/components/ui/Money";
import { Sheet } from "@/components/ui/Sheet";
import { forecastTargets } from "@/lib/consensus/redundancy";
import { changeTarget } from "../../actions";

type Props = {
  batchId: string;
  target: number;
  kMin: number;
  kMax: number;
  capCents: number;
  feeBps: number;
  agreements: {
    agreement: number;
    submissions: number;
    state: "none" | "settled" | "short" | "split" | "void";
  }[];
  medianPayCents: number | null;
};

/** Moves the agreement target and shows at once what the pictures merged so far would be by it. */
export function TargetPanel({
  batchId,
  target,
  kMin,
  kMax,
  capCents,
  feeBps,
  agreements,
  medianPayCents,
}: Props) {
  const router = useRouter();
  const [value, setValue] = useState(Math.round(target * 100));
  const [pending, startTransition] = useTransition();
  const open = agreements.filter(({ state }) => state === "short");
  const settled = agreements.filter(({ state }) => state === "settled");
  const payCents = medianPayCents ?? capCents;
  const [forecast] = forecastTargets(
    open.map(({ agreement, submissions }) => ({ agreement, labels: submissions })),
    [value / 100],
    { labelCents: payCents + Math.floor((payCents * feeBps) / 10_000), kMin, kMax },
  );
  const reaching = settled.filter(({ agreement }) => agreement * 100 >= value).length;
  const save = () =>
    startTransition(async () => {
      const answer = await changeTarget(null, { batchId, target: value / 100 });
      if (answer.ok) toast.success(doneText(answer.value.lookedAgain));
      else toast.error(answer.message);
      router.refresh();
    });
  return (
    <Sheet
      title="Agreement target"
      lead="What the pictures merged so far would be at another target. Settled pictures keep their result."
    >
      <label htmlFor="target" className="font-semibold">
        Target: <span className="font-figures">{value} %</span>
      </label>
      <input
        id="target"
        type="range"
        min={40}
        max={95}
        value={value}
        onChange={(event) => setValue(Number(event.currentTarget.value))}
        className="accent-agreed mt-2 w-full"
      />
      <p className="mt-3" aria-live="polite">
        {agreements.length === 0 || forecast === undefined ? (
          "No picture was merged yet."
        ) : open.length === 0 ? (
          "No picture waits for another annotator."
        ) : (
          <>
            Of {open.length} {open.length === 1 ? "picture" : "pictures"} waiting for another annotator,{" "}
            {forecast.settled} would be settled at once
            {forecast.short > 0 ? (
              <>
                ; {forecast.short} would ask for about {forecast.labelsToCome} more{" "}
                {forecast.labelsToCome === 1 ? "submission" : "submissions"}, about{" "}
                <Money cents={forecast.costCents} />
              </>
            ) : null}
            {forecast.split > 0 ? `; ${forecast.split} would go to the docket` : ""}.
          </>
        )}
      </p>
      {settled.length > 0 ? (
        <p className="text-muted mt-1 text-sm">
          {reaching} of the {settled.length} settled so far {reaching === 1 ? "reaches" : "reach"} {value} %.
        </p>
      ) : null}
      <Button className="mt-4" pending={pending} disabled={value === Math.round(target * 100)} onClick={save}>
        Change the target
      </Button>
    </Sheet>
  );
}

function doneText(lookedAgain: number): string {
  if (lookedAgain === 0) return "The target is changed for pictures that are not settled yet.";
  return `The target is changed. ${lookedAgain} ${lookedAgain === 1 ? "picture is" : "pictures are"} looked at again now.`;
}
