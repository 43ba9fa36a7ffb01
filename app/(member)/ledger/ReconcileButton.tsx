"use client";

import { useRouter } from "next/navigation";
import { useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { reconcileNow } from "./actions";

export function ReconcileButton() {
  const router = useRouter();
  const [pending, startTransition] = useTransition();
  return (
    <Button
      pending={pending}
      onClick={() =>
        startTransition(async () => {
          const answer = await reconcileNow(null, {});
          if (!answer.ok) toast.error(answer.message);
          else if (answer.value.ledgerCents === answer.value.stripeCents)
            toast.success("The ledger and Stripe agree to the cent.");
          else toast.error("They differ; an alert says by how much.");
          router.refresh();
        })
      }
    >
      Compare with Stripe
    </Button>
  );
}
