"use client";

import { useQuery } from "@tanstack/react-query";
import { useRouter } from "next/navigation";
import { useEffect, useRef } from "react";
import { Progress } from "@/components/ui/Progress";
import { StateMark } from "@/components/ui/StateMark";
import type { BatchStatus } from "@/lib/market/batches/batchStatus";

const BUSY_POLL_MS = 1500;
const CALM_POLL_MS = 8000;

/** How far the batch is, kept fresh; the page around it is read again when something changed. */
export function BatchProgress({ batchId, initial }: { batchId: string; initial: BatchStatus }) {
  const router = useRouter();
  const { data } = useQuery({
    queryKey: ["batch-status", batchId],
    queryFn: async () => {
      const answer = await fetch(`/api/batches/${batchId}/status`);
      if (!answer.ok) throw new Error("no answer");
      return (await answer.json()) as BatchStatus;
    },
    initialData: initial,
    refetchInterval: ({ state }) => (state.data && isBusy(state.data) ? BUSY_POLL_MS : CALM_POLL_MS),
  });
  const seen = useRef(whatPagesShow(initial));
  useEffect(() => {
    const now = whatPagesShow(data);
    if (now === seen.current) return;
    seen.current = now;
    router.refresh();
  }, [data, router]);
  const progress = data.progress;
  if (!progress) return null;
  const waiting = progress.images - progress.settled - progress.short - progress.split;
  return (
    <section aria-label="Progress" className="grid gap-3">
      <Progress
        label="Agreed"
        value={progress.images === 0 ? 0 : progress.settled / progress.images}
        detail={`${progress.settled} of ${progress.images} pictures`}
      />
      <div className="flex flex-wrap items-center gap-2" aria-live="polite">
        <StateMark state="agreed">{progress.settled} settled</StateMark>
        {progress.short > 0 ? <StateMark state="waits">{progress.short} short</StateMark> : null}
        {progress.split > 0 ? <StateMark state="disputed">{progress.split} split</StateMark> : null}
        <StateMark state="plain">{waiting} to draw</StateMark>
        <span className="text-muted text-sm">
          {progress.submissions} submissions
          {data.settling > 0 ? ` · merging ${data.settling}` : ""}
          {data.proposing > 0 ? ` · looking for proposals in ${data.proposing}` : ""}
          {data.learning ? " · learning from settled pictures" : ""}
        </span>
      </div>
    </section>
  );
}

/** What the page around shows of the status: when it changes, the page is read again. */
function whatPagesShow({ status, progress, training, releases }: BatchStatus): string {
  return JSON.stringify([status, progress, training, releases]);
}

function isBusy(status: BatchStatus): boolean {
  return (
    status.settling + status.proposing + status.checking > 0 ||
    status.learning ||
    status.releases.some((release) => release.status === "building")
  );
}
