"use client";

import { useRouter } from "next/navigation";
import { useState, useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { Money } from "@/components/ui/Money";
import { Sheet } from "@/components/ui/Sheet";
import { changeTarget } from "../../actions";

type Props = {
  batchId: string;
  target: number;
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
export function TargetPanel({ batchId, target, kMax, capCents, feeBps, agreements, medianPayCents }: Props) {
  const router = useRouter();
  const [value, setValue] = useState(Math.round(target * 100));
  const [pending, startTransition] = useTransition();
  const wouldSettle = agreements.filter((entry) => entry.agreement * 100 >= value);
  const wouldAsk = agreements.filter((entry) => entry.agreement * 100 < value && entry.submissions < kMax);
  const payCents = medianPayCents ?? capCents;
  const extraCents = wouldAsk.length * (payCents + Math.floor((payCents * feeBps) / 10_000));
  const save = () =>
    startTransition(async () => {
      const answer = await changeTarget(null, { batchId, target: value / 100 });
      if (answer.ok) toast.success("The target is changed for pictures that are not settled yet.");
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
        {agreements.length === 0 ? (
          "No picture was merged yet."
        ) : (
          <>
            {wouldSettle.length} of {agreements.length} would be settled; {wouldAsk.length} would ask one more
            annotator, about <Money cents={extraCents} />.
          </>
        )}
      </p>
      <Button className="mt-4" pending={pending} disabled={value === Math.round(target * 100)} onClick={save}>
        Change the target
      </Button>
    </Sheet>
  );
}
