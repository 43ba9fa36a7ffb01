import { runRefund } from "@/lib/market/money/refunds";
import type { Handler } from "./index";

export const refundRunJob: Handler<"refund.run"> = ({ refundId }, { nowMs }) =>
  runRefund({ refundId, nowMs: nowMs() });
