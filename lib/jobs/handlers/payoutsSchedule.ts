import { payOnSchedule } from "@/lib/market/money/payoutSchedule";
import type { Handler } from "./index";

export const payoutsScheduleJob: Handler<"payouts.schedule"> = async (_payload, { nowMs }) => {
  payOnSchedule({ nowMs: nowMs() });
};
