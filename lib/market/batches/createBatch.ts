import { getDb, inTransaction } from "@/db/client";
import { batches } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { newId } from "@/lib/ids";
import { requireTeam } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";

type Input = { actor: Actor; nowMs: number; teamId: string; title: string };

/** Keeps the suggested pay above the suggested floor at the outline's time that the cost panel reckons with. */
const OUTLINE_CENTS = 9;

/** A new draft batch of a team, with the product's suggested quality and pay. Returns its id. */
export function createBatch({ actor, nowMs, teamId, title }: Input): string {
  return inTransaction(getDb(), (tx) => {
    requireTeam(tx, teamId, actor, "editor");
    const id = newId("bat");
    tx.insert(batches)
      .values({ id, teamId, createdBy: actor.id, title, polygonCents: OUTLINE_CENTS, createdAtMs: nowMs })
      .run();
    audit(tx, { actorId: actor.id, action: "batch.created", subject: id, detail: { title }, nowMs });
    return id;
  });
}
