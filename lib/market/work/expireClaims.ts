import { eq } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { listExpiredClaims } from "@/db/queries/work";
import { claims } from "@/db/schema";

/** Gives the slots of claims whose lease ran out back to the pool. Returns how many. The drafts stay. */
export function expireClaims(tx: Reader, nowMs: number): number {
  const expired = listExpiredClaims(tx, nowMs, 500);
  for (const claim of expired) {
    tx.update(claims).set({ status: "expired", endedAtMs: nowMs }).where(eq(claims.id, claim.id)).run();
  }
  return expired.length;
}
