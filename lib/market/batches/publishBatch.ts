import { and, eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import {
  countPendingImages,
  countReadyImages,
  findBrief,
  listClasses,
  type BatchRow,
  type ClassRow,
} from "@/db/queries/batches";
import { batches, images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { quote, type Quote } from "@/lib/ledger/pricing";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { tellFunded } from "./batchLetters";
import { fundBatch } from "@/lib/market/money/settlement";

type By = { actor: Actor; nowMs: number; batchId: string };

/** The quote of a batch as it stands: the same function feeds the cost panel, the hold and the bill. */
export function quoteOf(batch: BatchRow, key: readonly ClassRow[], imageCount: number): Quote {
  const polygons = key.filter((row) => row.geometry === "polygon").length;
  return quote({
    imageCount,
    kMin: batch.kMin,
    kMax: batch.kMax,
    expectedInstances: batch.expectedInstances,
    polygonShare: key.length === 0 ? 0 : polygons / key.length,
    pay: batch,
    feeBps: batch.feeBps,
  });
}

/** What still stands between a draft and the board, in words; empty when it can be funded. */
export function blockersOf(
  batch: BatchRow,
  {
    ready,
    pending,
    classCount,
    hasBrief,
  }: { ready: number; pending: number; classCount: number; hasBrief: boolean },
): string[] {
  return [
    ...(ready === 0 ? ["Upload at least one picture."] : []),
    ...(pending > 0
      ? [`Wait for ${pending} ${pending === 1 ? "picture" : "pictures"} still on the way, or remove them.`]
      : []),
    ...(classCount === 0 ? ["Name at least one class."] : []),
    ...(hasBrief ? [] : ["Write the brief."]),
    ...(batch.baseCents + batch.boxCents + batch.polygonCents === 0 ? ["Set a pay above zero."] : []),
  ];
}

/**
 * Opens a draft to annotators and holds its worst-case cost in escrow, so that the bill can never exceed
 * the quote. A stale `versionSeen`, or a quote that changed since it was shown, is a conflict.
 */
export function publishBatch({
  versionSeen,
  worstCentsSeen,
  ...by
}: By & { versionSeen: number; worstCentsSeen: number }): void {
  inTransaction(getDb(), (tx) => {
    const batch = requireBatch(tx, by.batchId, by.actor, "editor");
    if (batch.status !== "draft") throw new AppError("conflict", "This batch was funded already.");
    if (batch.version !== versionSeen)
      throw new AppError(
        "conflict",
        "The batch changed since you opened this page. Look through it once more.",
      );
    const key = listClasses(tx, batch.id);
    const ready = countReadyImages(tx, batch.id);
    const blockers = blockersOf(batch, {
      ready,
      pending: countPendingImages(tx, batch.id),
      classCount: key.length,
      hasBrief: Boolean(findBrief(tx, batch.id)),
    });
    if (blockers[0]) throw new AppError("conflict", blockers[0]);
    const worst = quoteOf(batch, key, ready);
    const holdCents = worst.worstCents + worst.worstFeeCents;
    if (holdCents !== worstCentsSeen)
      throw new AppError("conflict", "The cost changed since you opened this page. Look at it once more.");
    fundBatch(tx, {
      actor: by.actor,
      batchId: batch.id,
      teamId: batch.teamId,
      amountCents: holdCents,
      nowMs: by.nowMs,
    });
    tx.update(images)
      .set({ slotsWanted: batch.kMin })
      .where(and(eq(images.batchId, batch.id), eq(images.status, "ready")))
      .run();
    tx.update(batches)
      .set({ status: "open", openedAtMs: by.nowMs, version: batch.version + 1 })
      .where(eq(batches.id, batch.id))
      .run();
    tellFunded(tx, batch, holdCents, by.nowMs);
    audit(tx, {
      actorId: by.actor.id,
      action: "batch.funded",
      subject: batch.id,
      detail: { holdCents, images: ready },
      nowMs: by.nowMs,
    });
  });
}

/** Stops new claims, or lets them go on. Work that is under way is not touched. */
export function setPaused({ paused, ...by }: By & { paused: boolean }): void {
  inTransaction(getDb(), (tx) => {
    const batch = requireBatch(tx, by.batchId, by.actor, "editor");
    const from = paused ? "open" : "paused";
    if (batch.status !== from) throw new AppError("conflict", `This batch is ${batch.status}.`);
    tx.update(batches)
      .set({ status: paused ? "paused" : "open", version: batch.version + 1 })
      .where(eq(batches.id, batch.id))
      .run();
    audit(tx, {
      actorId: by.actor.id,
      action: paused ? "batch.paused" : "batch.resumed",
      subject: batch.id,
      nowMs: by.nowMs,
    });
  });
}
