import { Bars } from "@/components/ui/Bars";
import { formatDuration, formatPercent } from "@/components/ui/Figures";
import { Money } from "@/components/ui/Money";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import type { ModelRow } from "@/db/queries/models";
import type { PredictionImportView } from "@/lib/contracts/batches";
import type { Savings } from "@/lib/market/proposals/savings";
import { ImportPredictions } from "./ImportPredictions";

type Props = {
  batchId: string;
  training: Omit<ModelRow, "model"> | undefined;
  savings: Savings;
  /** The latest results file; absent where there is none. */
  imported: PredictionImportView | undefined;
  mayImport: boolean;
};

/** What people did with the proposals and what that saved, what was learned, and the requester's own predictions. */
export function ProposalsPanel({ batchId, training, savings, imported, mayImport }: Props) {
  return (
    <Sheet
      title="Proposals"
      lead={
        training === undefined
          ? "Proposals come from the pictures alone so far; they learn from the first settled ones."
          : undefined
      }
    >
      <div className="grid gap-5">
        <Acceptance savings={savings} />
        {training ? <Learned training={training} /> : null}
        {mayImport || imported ? (
          <ImportPredictions batchId={batchId} imported={imported} mayImport={mayImport} />
        ) : null}
      </div>
    </Sheet>
  );
}

function Acceptance({ savings }: { savings: Savings }) {
  const { decided, takenShare, adjustedShare, dismissedShare, coveredShare, savedSeconds, savedCents } =
    savings;
  if (takenShare === null || adjustedShare === null || dismissedShare === null)
    return <p className="text-muted">Nobody has taken a proposal or sent one away yet.</p>;
  const isLoss = savedSeconds < 0;
  return (
    <div className="grid gap-4">
      <Bars
        label="What annotators did with the proposals"
        max={1}
        bars={[
          { label: "Taken as it was", value: takenShare, text: formatPercent(takenShare), state: "agreed" },
          {
            label: "Taken and adjusted",
            value: adjustedShare,
            text: formatPercent(adjustedShare),
            state: "waits",
          },
          {
            label: "Sent away",
            value: dismissedShare,
            text: formatPercent(dismissedShare),
            state: "disputed",
          },
        ]}
      />
      <Stats>
        <Stat
          caption="Decided on"
          note={
            coveredShare === null
              ? undefined
              : `${formatPercent(coveredShare)} of all shapes began as a proposal`
          }
        >
          {decided}
        </Stat>
        <Stat
          caption={isLoss ? "Time lost" : "Time saved"}
          note="against drawing by hand, by the keystroke-level model"
        >
          {formatDuration(Math.abs(savedSeconds) * 1000)}
        </Stat>
        <Stat
          caption={isLoss ? "Worth of it, lost" : "Worth of it"}
          note="at this batch's median pay an hour"
        >
          {savedCents === null ? "–" : <Money cents={Math.abs(savedCents)} />}
        </Stat>
      </Stats>
    </div>
  );
}

function Learned({ training }: { training: Omit<ModelRow, "model"> }) {
  const { recallWithDetector: withIt, recallWithoutDetector: without } = training;
  return (
    <div className="grid gap-2">
      <p>
        Version {training.version} learned from {training.settledImages} settled{" "}
        {training.settledImages === 1 ? "picture" : "pictures"}.{" "}
        {training.useful && training.apWith !== null ? (
          <>
            On settled pictures that it had not seen, its average precision is{" "}
            <span className="font-figures">{training.apWith.toFixed(2)}</span>
            {training.apWithout === null ? (
              ""
            ) : (
              <>
                {" "}
                (without learning <span className="font-figures">{training.apWithout.toFixed(2)}</span>)
              </>
            )}
            ; it is in use.
          </>
        ) : (
          <>It is not better than what was there before, so it is not in use.</>
        )}
      </p>
      {withIt !== null && without !== null ? (
        <p>
          The detector of everyday things{" "}
          {withIt > without
            ? "helps on the settled pictures and is in use"
            : "does not help on the settled pictures, so it is off"}
          : with twice as many proposals as objects,{" "}
          <span className="font-figures">{formatPercent(withIt)}</span> of the objects are met with it and{" "}
          <span className="font-figures">{formatPercent(without)}</span> without.
        </p>
      ) : null}
    </div>
  );
}
