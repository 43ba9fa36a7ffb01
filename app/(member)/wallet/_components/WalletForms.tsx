"use client";

import { useRouter } from "next/navigation";
import { useEffect, useState, useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { MoneyInput } from "@/components/ui/MoneyInput";
import { Notice } from "@/components/ui/Notice";
import { refund, topUp } from "../actions";

export function TopUpForm({ teamId }: { teamId: string }) {
  const [cents, setCents] = useState<number | undefined>(10_000);
  const [problem, setProblem] = useState<string | null>(null);
  const [pending, startTransition] = useTransition();
  const go = () =>
    startTransition(async () => {
      setProblem(null);
      const answer = await topUp(null, { teamId, amountCents: cents ?? 0, returnPath: "/wallet" });
      if (answer.ok) window.location.assign(answer.value.url);
      else setProblem(answer.message);
    });
  return (
    <div className="grid max-w-md gap-3">
      {problem ? (
        <Notice kind="danger" live>
          {problem}
        </Notice>
      ) : null}
      <div className="flex flex-wrap items-end gap-3">
        <MoneyInput
          label="Top up by card"
          className="grow"
          defaultCents={10_000}
          minCents={50}
          maxCents={5_000_000}
          onCentsChange={setCents}
        />
        <Button kind="primary" pending={pending} disabled={cents === undefined} onClick={go}>
          Pay by card
        </Button>
      </div>
      <p className="text-muted text-sm">
        Paid through Stripe. The money is here as soon as the payment is confirmed.
      </p>
    </div>
  );
}

export function RefundDialog({ teamId, balanceCents }: { teamId: string; balanceCents: number }) {
  const router = useRouter();
  const [cents, setCents] = useState<number | undefined>(balanceCents);
  return (
    <ConfirmDialog
      title="Send money back to the card?"
      consequence="It goes to the cards that paid, the latest first. Banks take some days to show it."
      confirmLabel="Send it back"
      trigger={<Button size="small">Send back to the card</Button>}
      onConfirm={async () => {
        if (cents === undefined) return "Write an amount that is in the wallet.";
        const answer = await refund(null, { teamId, amountCents: cents });
        if (!answer.ok) return answer.message;
        toast.success("It is on its way.");
        router.refresh();
      }}
    >
      <MoneyInput
        label="Amount"
        defaultCents={balanceCents}
        minCents={1}
        maxCents={balanceCents}
        onCentsChange={setCents}
      />
    </ConfirmDialog>
  );
}

const CHECK_EVERY_MS = 1500;
const CHECKS_MAX = 10;

/** After coming back from the payment page: reads the wallet again until the webhook has arrived. */
export function WaitForPayment() {
  const router = useRouter();
  const [checks, setChecks] = useState(0);
  useEffect(() => {
    if (checks >= CHECKS_MAX) return;
    const timer = setTimeout(() => {
      router.refresh();
      setChecks(checks + 1);
    }, CHECK_EVERY_MS);
    return () => clearTimeout(timer);
  }, [checks, router]);
  return (
    <Notice className="mb-6" live title="Thank you, the payment went through">
      The amount shows here within seconds of the confirmation.
    </Notice>
  );
}
