import { StateMark } from "@/components/ui/StateMark";

type Status = "draft" | "open" | "paused" | "closed";

/** The state of a batch as sign and word; one with split pictures says so first. */
export function BatchMark({
  status,
  progress = null,
}: {
  status: Status;
  progress?: { images: number; settled: number; split: number } | null;
}) {
  const { images = 0, settled = 0, split = 0 } = progress ?? {};
  if (status === "open" && split > 0) return <StateMark state="disputed">open, {split} split</StateMark>;
  if (status === "open" && images > 0 && settled === images)
    return <StateMark state="agreed">all settled</StateMark>;
  if (status === "open") return <StateMark state="waits">open</StateMark>;
  if (status === "closed") return <StateMark state="agreed">closed</StateMark>;
  return <StateMark state="plain">{status}</StateMark>;
}
