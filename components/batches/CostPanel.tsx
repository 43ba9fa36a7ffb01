import { Money } from "@/components/ui/Money";
import { Sheet } from "@/components/ui/Sheet";
import type { Quote } from "@/lib/ledger/pricing";

type Props = { cost: Quote | null; imageCount: number; feeBps: number };

/** What a batch will cost: expected, and at the very most. The figures come from what later charges. */
export function CostPanel({ cost, imageCount, feeBps }: Props) {
  return (
    <Sheet title="Cost" aria-live="polite">
      {cost === null ? (
        <p className="text-muted">Put the settings right to see the cost.</p>
      ) : (
        <dl className="grid grid-cols-[1fr_auto] gap-x-6 gap-y-2">
          <dt>Pictures</dt>
          <dd className="font-figures text-end">{imageCount}</dd>
          <dt>Pay, expected</dt>
          <dd className="text-end">
            <Money cents={cost.expectedCents} />
          </dd>
          <dt>Platform fee, {feeBps / 100} %</dt>
          <dd className="text-end">
            <Money cents={cost.expectedFeeCents} />
          </dd>
          <dt className="border-rule border-t pt-2 text-lg font-semibold">Expected</dt>
          <dd className="border-rule border-t pt-2 text-end text-lg font-semibold">
            <Money cents={cost.expectedCents + cost.expectedFeeCents} />
          </dd>
          <dt className="text-muted">Pay, worst case</dt>
          <dd className="text-muted text-end">
            <Money cents={cost.worstCents} />
          </dd>
          <dt className="text-muted">Fee, worst case</dt>
          <dd className="text-muted text-end">
            <Money cents={cost.worstFeeCents} />
          </dd>
          <dt className="border-rule border-t-3 border-double pt-2 text-lg font-semibold">Never more than</dt>
          <dd className="border-rule border-t-3 border-double pt-2 text-end text-lg font-semibold">
            <Money cents={cost.worstCents + cost.worstFeeCents} />
          </dd>
        </dl>
      )}
      <p className="text-muted mt-4 text-sm">
        The worst case is held when you fund the batch: every picture drawn by the most people, each at the
        cap. What is not spent goes back to your wallet.
      </p>
    </Sheet>
  );
}
