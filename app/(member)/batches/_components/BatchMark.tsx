import { StateMark } from "@/components/ui/StateMark";

type Status = "draft" | "open" | "paused" | "closed";

/** The state of a batch as sign and word; one with split pictures says so first. */
export function BatchMark({ status, split = 0 }: { status: Status; split?: number }) {
  if (status === "open" && split > 0) return <StateMark state="disputed">open, {split} split</StateMark>;
  if (status === "open") return <StateMark state="waits">open</StateMark>;
  if (status === "closed") return <StateMark state="agreed">closed</StateMark>;
  return <StateMark state="plain">{status}</StateMark>;
}
