"use client";

import { useTransition, useState } from "react";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { topUp } from "@/app/(member)/wallet/actions";
import { fund } from "../../../actions";

type Props = {
  batch: { id: string; title: string; teamId: string; version: number };
  holdCents: number;
  balanceCents: number;
  blockers: string[];
};

/** The smallest card payment, in cents. */
const CARD_MIN_CENTS = 50;

/** Funds the batch from the wallet, or tops the wallet up first by exactly what is missing. */
export function FundForm({ batch, holdCents, balanceCents, blockers }: Props) {
  const [pending, startTransition] = useTransition();
  const [problem, setProblem] = useState<string | null>(null);
  const missingCents = Math.max(0, holdCents - balanceCents);
  const payByCard = () =>
    startTransition(async () => {
      setProblem(null);
      const answer = await topUp(null, {
        teamId: batch.teamId,
        amountCents: Math.max(missingCents, CARD_MIN_CENTS),
        returnPath: `/batches/${batch.id}/setup/review`,
      });
      if (answer.ok) window.location.assign(answer.value.url);
      else setProblem(answer.message);
    });
  return (
    <Sheet title="Fund">
      <dl className="mb-4 grid grid-cols-[1fr_auto] gap-y-2">
        <dt>In the wallet</dt>
        <dd className="text-end">
          <Money cents={balanceCents} />
        </dd>
        <dt>Held for this batch</dt>
        <dd className="text-end">
          <Money cents={holdCents} />
        </dd>
      </dl>
      {problem ? (
        <Notice kind="danger" live className="mb-4">
          {problem}
        </Notice>
      ) : null}
      {blockers.length > 0 ? (
        <Notice kind="caution" title="Not yet">
          <ul className="list-disc ps-5">
            {blockers.map((blocker) => (
              <li key={blocker}>{blocker}</li>
            ))}
          </ul>
        </Notice>
      ) : missingCents > 0 ? (
        <div className="grid gap-3">
          <p>
            <Money cents={missingCents} /> is missing.
          </p>
          <Button kind="primary" pending={pending} onClick={payByCard}>
            Pay by card
          </Button>
        </div>
      ) : (
        <ConfirmDialog
          title={`Fund “${batch.title}”?`}
          consequence={
            <>
              <Money cents={holdCents} /> moves from your wallet into escrow, and annotators can begin at
              once. Pictures, key, quality and pay are fixed from then on; the brief can still be corrected.
              What is not spent comes back when you close the batch.
            </>
          }
          confirmLabel="Fund and open"
          trigger={
            <Button kind="primary" className="w-full">
              Fund and open
            </Button>
          }
          onConfirm={async () => {
            const answer = await fund(null, {
              batchId: batch.id,
              versionSeen: batch.version,
              worstCentsSeen: holdCents,
            });
            return answer.ok ? undefined : answer.message;
          }}
        />
      )}
    </Sheet>
  );
}
