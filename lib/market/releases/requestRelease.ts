import { count, eq, sql, and } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { images, releases, type ReleaseOptions } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";

type Input = { actor: Actor; nowMs: number; batchId: string } & Partial<ReleaseOptions>;

/**
 * Asks for a dataset release of what is settled now, without pictures, upright and without a licence unless
 * said otherwise. It is built in the background; returns its id. While one is being built it is that one's.
 */
export function requestRelease({
  actor,
  nowMs,
  batchId,
  withPictures = false,
  coordinates = "upright",
  licence = "",
}: Input): string {
  if (withPictures && coordinates === "stored")
    throw new AppError("invalid", "The pictures in a release are upright, so its coordinates must be too.");
  return inTransaction(getDb(), (tx) => {
    requireBatch(tx, batchId, actor, "viewer");
    const settled =
      tx
        .select({ count: count() })
        .from(images)
        .where(and(eq(images.batchId, batchId), eq(images.consensusState, "settled")))
        .get()?.count ?? 0;
    if (settled === 0)
      throw new AppError("conflict", "No picture is settled yet, so there is nothing to release.");
    const building = tx
      .select({ id: releases.id })
      .from(releases)
      .where(and(eq(releases.batchId, batchId), eq(releases.status, "building")))
      .get();
    if (building) return building.id;
    const number =
      (tx
        .select({ max: sql<number | null>`max(${releases.number})` })
        .from(releases)
        .where(eq(releases.batchId, batchId))
        .get()?.max ?? 0) + 1;
    const id = newId("rel");
    tx.insert(releases)
      .values({
        id,
        batchId,
        number,
        status: "building",
        options: { withPictures, coordinates, licence },
        requestedBy: actor.id,
        createdAtMs: nowMs,
      })
      .run();
    enqueue(tx, {
      kind: "release.build",
      payload: { releaseId: id },
      subject: batchId,
      uniqueKey: `release:${id}`,
      nowMs,
      priority: 2,
    });
    audit(tx, {
      actorId: actor.id,
      action: "release.requested",
      subject: batchId,
      detail: { number, withPictures, coordinates, licence },
      nowMs,
    });
    return id;
  });
}
