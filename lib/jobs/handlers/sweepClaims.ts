import { getDb, inTransaction } from "@/db/client";
import { forgetOldSweeps, noteDeadJobs } from "@/db/queries/system";
import { expireClaims } from "@/lib/market/work/expireClaims";
import type { Handler } from "./index";

export const sweepClaimsJob: Handler<"claims.sweep"> = async (_payload, { nowMs }) => {
  inTransaction(getDb(), (tx) => {
    expireClaims(tx, nowMs());
    noteDeadJobs(tx);
    forgetOldSweeps(tx, nowMs());
  });
};
