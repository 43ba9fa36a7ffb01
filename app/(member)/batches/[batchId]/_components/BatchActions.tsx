"use client";

import { Pause, Play } from "lucide-react";
import { useRouter } from "next/navigation";
import { useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Money } from "@/components/ui/Money";
import { closeBatch, pause } from "../../actions";

type Props = {
  batch: { id: string; title: string; status: "draft" | "open" | "paused" | "closed" };
  remainingCents: number;
  live: number;
  openDisputes: number;
};

/** Pause, go on, close: what a requester does with a whole batch. */
export function BatchActions({ batch, remainingCents, live, openDisputes }: Props) {
  const router = useRouter();
  const [pending, startTransition] = useTransition();
  if (batch.status === "draft" || batch.status === "closed") return null;
  const isPaused = batch.status === "paused";
  const setPaused = (paused: boolean) =>
    startTransition(async () => {
      const answer = await pause(null, { batchId: batch.id, paused });
      if (!answer.ok) toast.error(answer.message);
      else toast.success(paused ? "Paused: nobody can begin new pictures." : "Open again.");
      router.refresh();
    });
  return (
    <>
      <Button
        pending={pending}
        icon={isPaused ? <Play aria-hidden className="size-4" /> : <Pause aria-hidden className="size-4" />}
        onClick={() => setPaused(!isPaused)}
      >
        {isPaused ? "Go on" : "Pause"}
      </Button>
      <ConfirmDialog
        title={`Close “${batch.title}”?`}
        consequence={
          <>
            Nobody can draw in it any more. What was handed in but is not settled is paid as it stands; what
            then remains of <Money cents={remainingCents} /> goes back to your wallet. This cannot be undone.
            The releases stay.
            {live > 0 ? ` ${live} ${live === 1 ? "person is" : "people are"} drawing at the moment.` : ""}
            {openDisputes > 0
              ? ` ${openDisputes} ${openDisputes === 1 ? "dispute is" : "disputes are"} open.`
              : ""}
          </>
        }
        kind="danger"
        typed={batch.title}
        confirmLabel="Close the batch"
        trigger={<Button>Close</Button>}
        onConfirm={async () => {
          const answer = await closeBatch(null, { batchId: batch.id });
          if (!answer.ok) return answer.message;
          toast.success("The batch is closed.");
          router.refresh();
        }}
      />
    </>
  );
}
