"use client";

import { useRouter } from "next/navigation";
import { useState, useTransition } from "react";
import { toast } from "sonner";
import { CostPanel } from "@/components/batches/CostPanel";
import { Button } from "@/components/ui/Button";
import { MoneyInput } from "@/components/ui/MoneyInput";
import { Notice } from "@/components/ui/Notice";
import { NumberInput } from "@/components/ui/NumberInput";
import { Sheet } from "@/components/ui/Sheet";
import { quote } from "@/lib/ledger/pricing";
import { savePay } from "../../../actions";

type Settings = {
  kMin: number;
  kMax: number;
  agreementTarget: number;
  baseCents: number;
  boxCents: number;
  polygonCents: number;
  capCents: number;
  expectedInstances: number;
  floorHourlyCents: number;
};

type Props = {
  batch: { id: string; version: number; isDraft: boolean; feeBps: number };
  initial: Settings;
  imageCount: number;
  polygonShare: number;
};

/** Seconds that one instance and one picture take before anything is measured (common practice, rough). */
const SECONDS_PER_BOX = 7;
const SECONDS_PER_OUTLINE = 30;
const SECONDS_PER_IMAGE = 15;

/** Step three: how many people, what agreement, what pay; the cost moves along as one types. */
export function PayStep({ batch, initial, imageCount, polygonShare }: Props) {
  const router = useRouter();
  const [pending, startTransition] = useTransition();
  const [problem, setProblem] = useState<{ message: string; fields: Record<string, string> } | null>(null);
  const [settings, setSettings] = useState(initial);
  const set = (part: Partial<Settings>) => setSettings((before) => ({ ...before, ...part }));
  const cents = (name: keyof Settings) => (value: number | undefined) =>
    value !== undefined && set({ [name]: value });
  const isSound = settings.kMax >= settings.kMin && settings.capCents >= settings.baseCents;
  const cost = isSound
    ? quote({
        imageCount,
        kMin: settings.kMin,
        kMax: settings.kMax,
        expectedInstances: settings.expectedInstances,
        polygonShare,
        pay: settings,
        feeBps: batch.feeBps,
      })
    : null;
  const secondsPerTask =
    SECONDS_PER_IMAGE +
    settings.expectedInstances * (polygonShare * SECONDS_PER_OUTLINE + (1 - polygonShare) * SECONDS_PER_BOX);
  const expectedPayCents = Math.min(
    settings.capCents,
    settings.baseCents +
      settings.expectedInstances *
        (polygonShare * settings.polygonCents + (1 - polygonShare) * settings.boxCents),
  );
  const hourlyCents = Math.round((expectedPayCents / secondsPerTask) * 3600);

  function save(goOn: boolean): void {
    setProblem(null);
    startTransition(async () => {
      const answer = await savePay(null, { batchId: batch.id, ...settings, versionSeen: batch.version });
      if (!answer.ok) return setProblem(answer);
      toast.success("Quality and pay are saved.");
      if (goOn) router.push(`/batches/${batch.id}/setup/review`);
      router.refresh();
    });
  }

  return (
    <div className="grid items-start gap-6 lg:grid-cols-[1fr_22rem]">
      <div className="grid gap-6">
        {problem ? (
          <Notice kind="danger" live>
            {problem.message}
          </Notice>
        ) : null}
        {batch.isDraft ? null : <Notice>Quality and pay are fixed since the batch was funded.</Notice>}
        <Sheet
          title="Quality"
          lead="Each picture is drawn by several people. It is settled when they agree enough; if not, one more is asked, up to the most. If they still differ, an admin decides."
        >
          <div className="grid gap-5 sm:grid-cols-2">
            <NumberInput
              label="Fewest annotators a picture"
              min={2}
              max={9}
              defaultValue={initial.kMin}
              disabled={!batch.isDraft}
              error={problem?.fields.kMin}
              onNumberChange={(value) => value !== undefined && set({ kMin: value })}
            />
            <NumberInput
              label="Most annotators a picture"
              min={2}
              max={9}
              defaultValue={initial.kMax}
              disabled={!batch.isDraft}
              error={
                problem?.fields.kMax ?? (settings.kMax < settings.kMin ? "Not below the fewest." : undefined)
              }
              onNumberChange={(value) => value !== undefined && set({ kMax: value })}
            />
            <div className="sm:col-span-2">
              <label htmlFor="target" className="text-[0.95rem] font-semibold">
                Agreement target:{" "}
                <span className="font-figures">{Math.round(settings.agreementTarget * 100)} %</span>
              </label>
              <p id="target-hint" className="text-muted text-sm">
                Higher asks more people more often. For outlines 60 to 75 % is demanding; experts among
                themselves reach an overlap of 93 to 96 % (Gupta et al., 2019), on single objects that all of
                them found.
              </p>
              <input
                id="target"
                type="range"
                aria-describedby="target-hint"
                min={40}
                max={95}
                step={1}
                disabled={!batch.isDraft}
                className="accent-agreed mt-2 w-full"
                value={Math.round(settings.agreementTarget * 100)}
                onChange={(event) => set({ agreementTarget: Number(event.currentTarget.value) / 100 })}
              />
            </div>
          </div>
        </Sheet>
        <Sheet
          title="Pay"
          lead="Each annotator is paid for what agrees: the base for the picture, and the price of each agreed instance, up to the cap."
        >
          <div className="grid gap-5 sm:grid-cols-2">
            <MoneyInput
              label="Base a picture"
              defaultCents={settings.baseCents}
              minCents={0}
              maxCents={10_000}
              disabled={!batch.isDraft}
              onCentsChange={cents("baseCents")}
            />
            <MoneyInput
              label="Cap a picture"
              defaultCents={settings.capCents}
              minCents={1}
              maxCents={100_000}
              disabled={!batch.isDraft}
              error={
                problem?.fields.capCents ??
                (settings.capCents < settings.baseCents ? "Not below the base." : undefined)
              }
              onCentsChange={cents("capCents")}
            />
            <MoneyInput
              label="Each agreed box"
              defaultCents={settings.boxCents}
              minCents={0}
              maxCents={10_000}
              disabled={!batch.isDraft}
              onCentsChange={cents("boxCents")}
            />
            <MoneyInput
              label="Each agreed outline"
              defaultCents={settings.polygonCents}
              minCents={0}
              maxCents={10_000}
              disabled={!batch.isDraft}
              onCentsChange={cents("polygonCents")}
            />
            <NumberInput
              label="Objects a picture, your guess"
              hint="For the expected cost only; the worst case does not depend on it."
              min={0.1}
              max={500}
              step={0.5}
              defaultValue={initial.expectedInstances}
              disabled={!batch.isDraft}
              onNumberChange={(value) => value !== undefined && set({ expectedInstances: value })}
            />
            <MoneyInput
              label="Floor an hour"
              hint="Below this measured pay the product warns you and annotators."
              defaultCents={settings.floorHourlyCents}
              minCents={0}
              maxCents={20_000}
              disabled={!batch.isDraft}
              onCentsChange={cents("floorHourlyCents")}
            />
          </div>
          {hourlyCents < settings.floorHourlyCents ? (
            <Notice
              kind="caution"
              className="mt-5"
              live
              title={`About $${(hourlyCents / 100).toFixed(2)} an hour, below your floor`}
            >
              Reckoned with {SECONDS_PER_OUTLINE} s an outline and {SECONDS_PER_BOX} s a box until times are
              measured. Minimum pay and contracts are a matter of local law; ask a licensed adviser where you
              are not sure.
            </Notice>
          ) : (
            <p className="text-muted mt-5 text-sm">
              About <span className="font-figures">${(hourlyCents / 100).toFixed(2)}</span> an hour, reckoned
              with {SECONDS_PER_OUTLINE} s an outline and {SECONDS_PER_BOX} s a box until times are measured.
            </p>
          )}
        </Sheet>
      </div>
      <div className="grid gap-4 lg:sticky lg:top-20">
        <CostPanel cost={cost} imageCount={imageCount} feeBps={batch.feeBps} />
        {batch.isDraft ? (
          <div className="flex flex-wrap justify-end gap-3">
            <Button pending={pending} onClick={() => save(false)}>
              Save
            </Button>
            <Button kind="primary" pending={pending} disabled={!isSound} onClick={() => save(true)}>
              Save and go on
            </Button>
          </div>
        ) : null}
      </div>
    </div>
  );
}
