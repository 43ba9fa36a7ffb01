import { reconcile } from "@/lib/market/money/reconcile";
import type { Handler } from "./index";

export const reconcileJob: Handler<"ledger.reconcile"> = async (_payload, { nowMs }) => {
  await reconcile({ nowMs: nowMs() });
};
