import { and, eq, inArray } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findClaim, findDraft, listTakenSlots, type ClaimRow } from "@/db/queries/work";
import { findBatch, findImage } from "@/db/queries/batches";
import { claims, drafts } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import { AppError, invariant } from "@/lib/errors";
import { LEASE_MS } from "./claimTask";
import { expireClaims } from "./expireClaims";

type By = { actor: Actor; nowMs: number; claimId: string };

/** The actor's claim, live. Somebody else's is not found; one that ended says how. */
export function requireLiveClaim(tx: Tx, { actor, nowMs, claimId }: By): ClaimRow {
  const claim = findClaim(tx, claimId);
  if (!claim || claim.annotatorId !== actor.id) throw new AppError("not_found", "There is no such claim.");
  if (claim.status === "submitted") throw new AppError("conflict", "This image was handed in already.");
  if (claim.status === "released") throw new AppError("gone", "You gave this image back.");
  if (claim.status === "expired" || claim.expiresAtMs < nowMs) return revive(tx, claim, nowMs);
  return claim;
}

/**
 * A claim that ran out while its image still has a place goes on, so that a lost hour of network costs
 * nothing; in a paused batch too, because work that is under way is not touched.
 */
function revive(tx: Tx, claim: ClaimRow, nowMs: number): ClaimRow {
  expireClaims(tx, nowMs); // places that others lost are free as well
  const batch = findBatch(tx, claim.batchId);
  const image = findImage(tx, claim.imageId);
  invariant(batch && image, "a claim has a batch and an image");
  const newer = tx
    .select({ id: claims.id })
    .from(claims)
    .where(
      and(
        eq(claims.imageId, claim.imageId),
        eq(claims.annotatorId, claim.annotatorId),
        inArray(claims.status, ["live", "submitted"]),
      ),
    )
    .get();
  if (newer) throw new AppError("gone", "You hold this image under a newer claim. Open it from the board.");
  const taken = listTakenSlots(tx, claim.imageId);
  const isWanted =
    (batch.status === "open" || batch.status === "paused") &&
    (image.consensusState === "none" || image.consensusState === "short");
  if (!isWanted) {
    throw new AppError(
      "gone",
      "Your claim ran out and this image takes no more work. Your drawing is kept in this browser.",
    );
  }
  if (taken.length >= image.slotsWanted) {
    throw new AppError(
      "gone",
      "Your claim ran out and somebody else has the place. Your drawing is kept in this browser.",
    );
  }
  let slot = 1;
  while (taken.includes(slot)) slot += 1;
  return tx
    .update(claims)
    .set({ status: "live", slot, heartbeatAtMs: nowMs, expiresAtMs: nowMs + LEASE_MS, endedAtMs: null })
    .where(eq(claims.id, claim.id))
    .returning()
    .get();
}

/** A sign of life: the lease starts anew. */
export function heartbeat(by: By): { expiresAtMs: number } {
  return inTransaction(getDb(), (tx) => {
    const claim = requireLiveClaim(tx, by);
    const expiresAtMs = by.nowMs + LEASE_MS;
    tx.update(claims).set({ heartbeatAtMs: by.nowMs, expiresAtMs }).where(eq(claims.id, claim.id)).run();
    return { expiresAtMs };
  });
}

/**
 * Keeps the draft. `version` is the one that the desk last got back (0 at first): another tab that saved in
 * between makes it a conflict, and nothing is overwritten.
 */
export function saveDraft({ document, version, ...by }: By & { document: DeskDocument; version: number }): {
  version: number;
  expiresAtMs: number;
} {
  return inTransaction(getDb(), (tx) => {
    const claim = requireLiveClaim(tx, by);
    const stored = findDraft(tx, claim.id);
    if ((stored?.version ?? 0) !== version) {
      throw new AppError("conflict", "This image was changed in another tab or on another device.");
    }
    const next = version + 1;
    const values = { claimId: claim.id, version: next, document, savedAtMs: by.nowMs };
    tx.insert(drafts).values(values).onConflictDoUpdate({ target: drafts.claimId, set: values }).run();
    const expiresAtMs = by.nowMs + LEASE_MS;
    tx.update(claims).set({ heartbeatAtMs: by.nowMs, expiresAtMs }).where(eq(claims.id, claim.id)).run();
    return { version: next, expiresAtMs };
  });
}

/** Gives the image back to the pool. The draft is dropped. */
export function releaseClaim(by: By): void {
  inTransaction(getDb(), (tx) => {
    const claim = findClaim(tx, by.claimId);
    if (!claim || claim.annotatorId !== by.actor.id)
      throw new AppError("not_found", "There is no such claim.");
    if (claim.status !== "live") return;
    tx.update(claims).set({ status: "released", endedAtMs: by.nowMs }).where(eq(claims.id, claim.id)).run();
    tx.delete(drafts).where(eq(drafts.claimId, claim.id)).run();
  });
}
