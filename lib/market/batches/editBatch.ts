import { and, eq, inArray } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findBrief, listClasses, type BatchRow } from "@/db/queries/batches";
import { batches, briefExamples, briefVersions, classes, images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { KeyAndBriefInput, QualityAndPayInput } from "@/lib/contracts/batches";
import { AppError } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { requireBatch } from "@/lib/market/access";
import { audit } from "@/lib/market/audit";
import { relookShort } from "./relookShort";
import { proposeAgain } from "@/lib/market/proposals/proposeAgain";

type By = { actor: Actor; nowMs: number; batchId: string };

/** The batch for an edit; somebody else's edit in between is a conflict. */
function requireFresh(tx: Tx, { actor, batchId }: By, versionSeen: number): BatchRow {
  const batch = requireBatch(tx, batchId, actor, "editor");
  if (batch.version !== versionSeen) {
    throw new AppError(
      "conflict",
      "Somebody changed this batch in the meantime. Reload to see it; your text is still here.",
    );
  }
  return batch;
}

/**
 * Saves title, key, brief and cautions. Each change of the brief is a new version, because work is judged
 * by the brief that was shown. In an open batch the brief can still be corrected, but the key is fixed.
 */
export function saveKeyAndBrief({ input, ...by }: By & { input: KeyAndBriefInput }): void {
  const { batchId, nowMs, actor } = by;
  inTransaction(getDb(), (tx) => {
    const batch = requireFresh(tx, by, input.versionSeen);
    if (batch.status === "closed") throw new AppError("conflict", "A closed batch cannot be changed.");
    if (batch.status === "draft") {
      const before = knownToDetector(tx, batchId);
      saveClasses(tx, batchId, input.classes);
      // The pictures were looked at when they came, before the key was known.
      if (knownToDetector(tx, batchId) !== before) proposeAgain(tx, { batchId, nowMs });
    }
    const brief = findBrief(tx, batchId);
    const briefVersion = brief?.markdown === input.brief ? brief.version : (brief?.version ?? 0) + 1;
    if (briefVersion !== brief?.version) {
      tx.insert(briefVersions)
        .values({
          batchId,
          version: briefVersion,
          markdown: input.brief,
          createdBy: actor.id,
          createdAtMs: nowMs,
        })
        .run();
      audit(tx, {
        actorId: actor.id,
        action: "brief.changed",
        subject: batchId,
        detail: { version: briefVersion },
        nowMs,
      });
    }
    saveExamples(tx, batchId, input.examples);
    const { title, sensitive, sensitiveNote, safetyCritical } = input;
    tx.update(batches)
      .set({ title, sensitive, sensitiveNote, safetyCritical, briefVersion, version: batch.version + 1 })
      .where(eq(batches.id, batchId))
      .run();
  });
}

/** Which classes the detector knows and as what, to tell a change by. */
function knownToDetector(tx: Tx, batchId: string): string {
  return JSON.stringify(
    listClasses(tx, batchId)
      .filter(({ detectorLabel }) => detectorLabel !== null)
      .map(({ id, detectorLabel }) => [id, detectorLabel]),
  );
}

function saveClasses(tx: Tx, batchId: string, wanted: KeyAndBriefInput["classes"]): void {
  const known = new Map(listClasses(tx, batchId).map((row) => [row.id, row]));
  const kept = new Set(wanted.flatMap((c) => (c.id !== null && known.has(c.id) ? [c.id] : [])));
  const gone = [...known.keys()].filter((id) => !kept.has(id));
  if (gone.length > 0) tx.delete(classes).where(inArray(classes.id, gone)).run();
  // Two passes, because two classes may swap numbers or names and both are unique at every moment.
  for (const [index, id] of [...kept].entries()) {
    tx.update(classes)
      .set({ number: -1 - index, name: `\u0000${id}` })
      .where(eq(classes.id, id))
      .run();
  }
  for (const { id, ...values } of wanted) {
    if (id !== null && kept.has(id)) tx.update(classes).set(values).where(eq(classes.id, id)).run();
    else
      tx.insert(classes)
        .values({ id: newId("cls"), batchId, ...values })
        .run();
  }
}

function saveExamples(tx: Tx, batchId: string, examples: KeyAndBriefInput["examples"]): void {
  tx.delete(briefExamples).where(eq(briefExamples.batchId, batchId)).run();
  examples.forEach(({ imageId, caption }, ordinal) => {
    const own = tx
      .select({ id: images.id })
      .from(images)
      .where(and(eq(images.id, imageId), eq(images.batchId, batchId)))
      .get();
    if (!own)
      throw new AppError("invalid", "An example picture is not part of this batch.", {
        examples: "Unknown picture.",
      });
    tx.insert(briefExamples)
      .values({ id: newId("exa"), batchId, imageId, caption, ordinal })
      .run();
  });
}

/** Saves redundancy, target and pay of a draft. What was quoted and funded cannot be changed afterwards. */
export function saveQualityAndPay({ input, ...by }: By & { input: QualityAndPayInput }): void {
  inTransaction(getDb(), (tx) => {
    const batch = requireFresh(tx, by, input.versionSeen);
    if (batch.status !== "draft")
      throw new AppError("conflict", "Pay and quality are fixed once a batch is funded.");
    const { versionSeen: _, ...values } = input;
    tx.update(batches)
      .set({ ...values, version: batch.version + 1 })
      .where(eq(batches.id, by.batchId))
      .run();
  });
}

/**
 * Sets another agreement target on an open batch. Images already settled keep their result; those that wait for one
 * more annotator and reach the new target are looked at again. Returns how many those are.
 */
export function setAgreementTarget({ target, ...by }: By & { target: number }): { lookedAgain: number } {
  return inTransaction(getDb(), (tx) => {
    const batch = requireBatch(tx, by.batchId, by.actor, "editor");
    if (batch.status === "closed") throw new AppError("conflict", "A closed batch cannot be changed.");
    tx.update(batches)
      .set({ agreementTarget: target, version: batch.version + 1 })
      .where(eq(batches.id, batch.id))
      .run();
    const lookedAgain = relookShort(tx, {
      batchId: batch.id,
      target,
      version: batch.version + 1,
      nowMs: by.nowMs,
    });
    audit(tx, {
      actorId: by.actor.id,
      action: "batch.target",
      subject: batch.id,
      detail: { from: batch.agreementTarget, to: target, lookedAgain },
      nowMs: by.nowMs,
    });
    return { lookedAgain };
  });
}
