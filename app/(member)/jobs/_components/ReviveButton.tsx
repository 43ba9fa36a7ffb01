"use client";

import { useRouter } from "next/navigation";
import { useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { revive } from "../actions";

export function ReviveButton({ jobId }: { jobId: string }) {
  const router = useRouter();
  const [pending, startTransition] = useTransition();
  return (
    <Button
      size="small"
      className="mt-2"
      pending={pending}
      onClick={() =>
        startTransition(async () => {
          const answer = await revive(null, { jobId });
          if (answer.ok) toast.success("It is queued again.");
          else toast.error(answer.message);
          router.refresh();
        })
      }
    >
      Try again
    </Button>
  );
}
