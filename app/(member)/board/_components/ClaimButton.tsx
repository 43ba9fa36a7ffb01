"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";

type Props = { batchId: string; openImages: number; sensitiveNote: string | null };

/** Claims a picture of the batch and goes to the desk. Sensitive content is flagged before the first picture. */
export function ClaimButton({ batchId, openImages, sensitiveNote }: Props) {
  const router = useRouter();
  const [pending, setPending] = useState(false);

  async function claim(): Promise<string | undefined> {
    setPending(true);
    try {
      const answer = await fetch("/api/claims", {
        method: "POST",
        headers: { "content-type": "application/json" },
        body: JSON.stringify({ batchId }),
      });
      const body = (await answer.json()) as { claimId?: string; detail?: string };
      if (answer.ok) {
        router.push(`/desk/${body.claimId}`);
        return undefined;
      }
      router.refresh();
      return body.detail ?? "That did not work, and nothing was changed.";
    } finally {
      setPending(false);
    }
  }

  if (sensitiveNote !== null && openImages > 0) {
    return (
      <ConfirmDialog
        title="Sensitive content"
        consequence={`${sensitiveNote} You can give a picture back at any time without a mark against you.`}
        confirmLabel="Begin"
        trigger={<Button kind="primary">Begin</Button>}
        onConfirm={claim}
      />
    );
  }
  return (
    <Button
      kind="primary"
      pending={pending}
      disabled={openImages === 0}
      onClick={async () => {
        const problem = await claim();
        if (problem) toast.error(problem);
      }}
    >
      {openImages === 0 ? "Nothing waits for you" : "Begin"}
    </Button>
  );
}
