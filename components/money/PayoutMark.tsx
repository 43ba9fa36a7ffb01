import { StateMark } from "@/components/ui/StateMark";

type Status = "queued" | "sent" | "paid" | "failed";

export function PayoutMark({ status }: { status: Status }) {
  if (status === "paid") return <StateMark state="agreed">arrived</StateMark>;
  if (status === "failed") return <StateMark state="disputed">came back</StateMark>;
  return <StateMark state="waits">{status === "sent" ? "on its way" : "being sent"}</StateMark>;
}
