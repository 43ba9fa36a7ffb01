import { getDb, inTransaction } from "@/db/client";
import { findBatch } from "@/db/queries/batches";
import { findUser } from "@/db/queries/people";
import { findNextImage, listLiveClaims, listTakenSlots, type ClaimRow } from "@/db/queries/work";
import { claims } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { expireClaims } from "./expireClaims";

type Input = { actor: Actor; nowMs: number; batchId: string; imageId?: string | undefined };

/** How long a claim holds without a sign of life. */
export const LEASE_MS = 20 * 60_000;

/** Images that one annotator can hold at a time: the one on the desk and the one prepared next. */
export const LIVE_CLAIMS_MAX = 2;

/**
 * Holds one slot of one image for the annotator: the one that was asked for, or the next by need. A claim
 * that this person already holds on the batch is given back instead of a new one. The write lock is held
 * from the first read, so two people never get the same slot; a unique index holds that too.
 */
export function claimTask({ actor, nowMs, batchId, imageId }: Input): ClaimRow {
  return inTransaction(getDb(), (tx) => {
    expireClaims(tx, nowMs);
    const batch = findBatch(tx, batchId);
    if (!batch || batch.status === "draft") throw new AppError("not_found", "There is no such batch.");
    const live = listLiveClaims(tx, actor.id, nowMs);
    const held = live.find((claim) => claim.batchId === batchId && (!imageId || claim.imageId === imageId));
    if (held) return held;
    if (batch.status !== "open")
      throw new AppError("conflict", "This batch takes no new work at the moment.");
    const person = findUser(tx, actor.id);
    if (batch.sensitive && !person?.acceptsSensitive) {
      throw new AppError(
        "forbidden",
        "This batch has sensitive content. You can opt in on your account page.",
      );
    }
    if (live.length >= LIVE_CLAIMS_MAX) {
      throw new AppError(
        "conflict",
        `You hold ${live.length} images already. Hand one in or give one back first.`,
      );
    }
    const image = findNextImage(tx, batchId, actor.id, imageId);
    if (!image) {
      throw new AppError(
        imageId ? "conflict" : "not_found",
        imageId ? "Somebody else has this image now." : "No image of this batch waits for you at the moment.",
      );
    }
    const taken = new Set(listTakenSlots(tx, image.id));
    let slot = 1;
    while (taken.has(slot)) slot += 1;
    invariant(slot <= image.slotsWanted, "a free image has a free slot");
    return tx
      .insert(claims)
      .values({
        id: newId("clm"),
        batchId,
        imageId: image.id,
        annotatorId: actor.id,
        slot,
        status: "live",
        briefVersion: batch.briefVersion,
        claimedAtMs: nowMs,
        heartbeatAtMs: nowMs,
        expiresAtMs: nowMs + LEASE_MS,
      })
      .returning()
      .get();
  });
}
