import { settleOverdue } from "@/lib/market/consensus/settleOverdue";
import type { Handler } from "./index";

export const settleOverdueJob: Handler<"consensus.overdue"> = async (_payload, { nowMs, progress }) => {
  settleOverdue({ nowMs: nowMs(), progress });
};
