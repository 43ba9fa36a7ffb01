import { and, eq, lt } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { claims } from "@/db/schema";

/** Gives the slots of claims whose lease ran out back to the pool. Returns how many. The drafts stay. */
export function expireClaims(tx: Reader, nowMs: number): number {
  return tx
    .update(claims)
    .set({ status: "expired", endedAtMs: nowMs })
    .where(and(eq(claims.status, "live"), lt(claims.expiresAtMs, nowMs)))
    .run().changes;
}
