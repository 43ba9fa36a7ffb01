"use client";

import { useRouter } from "next/navigation";
import { useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Money } from "@/components/ui/Money";
import { onboard, payOut } from "../actions";

const MIN_CENTS = 100;

export function OnboardButton({ hasAccount }: { hasAccount: boolean }) {
  const [pending, startTransition] = useTransition();
  return (
    <Button
      kind="primary"
      pending={pending}
      onClick={() =>
        startTransition(async () => {
          const answer = await onboard(null, {});
          if (answer.ok) window.location.assign(answer.value.url);
          else toast.error(answer.message);
        })
      }
    >
      {hasAccount ? "Go on with your bank account" : "Register a bank account"}
    </Button>
  );
}

export function PayoutButton({ payableCents }: { payableCents: number }) {
  const router = useRouter();
  if (payableCents < MIN_CENTS) return <Button disabled>A payout starts at $1.00</Button>;
  return (
    <ConfirmDialog
      title="Pay out?"
      consequence={
        <>
          <Money cents={payableCents} /> goes to your bank account. It usually arrives within days.
        </>
      }
      confirmLabel="Pay out"
      trigger={<Button kind="primary">Pay out</Button>}
      onConfirm={async () => {
        const answer = await payOut(null, {});
        if (!answer.ok) return answer.message;
        toast.success("It is on its way.");
        router.refresh();
      }}
    />
  );
}
