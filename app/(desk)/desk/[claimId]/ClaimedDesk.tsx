"use client";

import { useRouter } from "next/navigation";
import { useMemo } from "react";
import { toast } from "sonner";
import { Desk } from "@/components/desk/Desk";
import type { DeskServices } from "@/components/desk/services";
import type { DeskTask } from "@/lib/contracts/desk";
import { callJson } from "@/lib/http/callJson";

/** The desk, joined to the endpoints of its claim. After handing in, the next picture follows at once. */
export function ClaimedDesk({ task, batchId }: { task: DeskTask; batchId: string }) {
  const router = useRouter();
  const services = useMemo((): DeskServices => {
    const base = `/api/claims/${task.claimId}`;
    return {
      saveDraft: (document, version) => callJson("PUT", `${base}/draft`, { document, version }),
      heartbeat: () => callJson("POST", `${base}/heartbeat`),
      submit: async ({ document, activeSeconds }) => {
        const { submissionId } = await callJson<{ submissionId: string }>("POST", `${base}/submission`, {
          document,
          activeSeconds,
        });
        toast.success("Handed in. Your score follows when the others have drawn it.");
        try {
          const next = await callJson<{ claimId: string }>("POST", "/api/claims", { batchId });
          router.replace(`/desk/${next.claimId}`);
        } catch {
          router.replace(`/work/${submissionId}`);
        }
      },
      release: async () => {
        await callJson("DELETE", base);
        router.replace("/board");
      },
    };
  }, [task.claimId, batchId, router]);
  return <Desk key={task.claimId} task={task} mode="annotate" services={services} />;
}
