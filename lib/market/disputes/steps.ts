import { asc, eq } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { disputeSteps, users } from "@/db/schema";

type Step = Omit<typeof disputeSteps.$inferInsert, "id" | "atMs"> & { nowMs: number };

/** Adds to what happened to a dispute, in the caller's transaction. */
export function noteStep(tx: Reader, { nowMs, ...step }: Step): void {
  tx.insert(disputeSteps)
    .values({ ...step, atMs: nowMs })
    .run();
}

/** What happened to a dispute, in order, with names. */
export function listSteps(db: Reader, disputeId: string) {
  return db
    .select({ step: disputeSteps, actorName: users.name })
    .from(disputeSteps)
    .leftJoin(users, eq(users.id, disputeSteps.actorId))
    .where(eq(disputeSteps.disputeId, disputeId))
    .orderBy(asc(disputeSteps.id))
    .all();
}
