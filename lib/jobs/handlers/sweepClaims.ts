import { getDb, inTransaction } from "@/db/client";
import { expireClaims } from "@/lib/market/work/expireClaims";
import type { Handler } from "./index";

export const sweepClaimsJob: Handler<"claims.sweep"> = async (_payload, { nowMs }) => {
  inTransaction(getDb(), (tx) => expireClaims(tx, nowMs()));
};
