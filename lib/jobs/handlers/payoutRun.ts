import { runPayout } from "@/lib/market/money/payouts";
import type { Handler } from "./index";

export const payoutRunJob: Handler<"payout.run"> = ({ payoutId }, { nowMs }) =>
  runPayout({ payoutId, nowMs: nowMs() });
