import { createHash } from "node:crypto";
import { count, eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findImage, listClasses, type ClassRow, type ImageRow } from "@/db/queries/batches";
import { findClaim } from "@/db/queries/work";
import { claims, drafts, submissions } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import { AppError, invariant } from "@/lib/errors";
import { ringsArea } from "@/lib/geometry/region";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { requireLiveClaim } from "./keepClaim";

type Input = { actor: Actor; nowMs: number; claimId: string; document: DeskDocument; activeSeconds: number };

/** SHA-256 of a document as it is stored, hex. */
export function documentHash(document: DeskDocument): string {
  return createHash("sha256").update(JSON.stringify(document)).digest("hex");
}

/**
 * Hands in what was drawn for one image. Once; saying it again with the same drawing is answered with the
 * same submission. When the image has as many as it wants, the consensus is queued in the same transaction.
 */
export function submitWork({ actor, nowMs, claimId, document, activeSeconds }: Input): {
  submissionId: string;
} {
  return inTransaction(getDb(), (tx) => {
    const known = findClaim(tx, claimId);
    const earlier =
      known?.annotatorId === actor.id && known.status === "submitted"
        ? tx.select().from(submissions).where(eq(submissions.claimId, claimId)).get()
        : undefined;
    const sha256 = documentHash(document);
    if (earlier?.sha256 === sha256) return { submissionId: earlier.id };
    const claim = requireLiveClaim(tx, { actor, nowMs, claimId });
    const image = findImage(tx, claim.imageId);
    invariant(image, "a claim has an image");
    checkDocument(document, image, listClasses(tx, claim.batchId));
    const submissionId = newId("sub");
    tx.insert(submissions)
      .values({
        id: submissionId,
        claimId,
        batchId: claim.batchId,
        imageId: claim.imageId,
        annotatorId: actor.id,
        document,
        sha256,
        // Nobody can have been active for longer than the claim has existed.
        activeSeconds: Math.min(activeSeconds, Math.max(1, (nowMs - claim.claimedAtMs) / 1000)),
        submittedAtMs: nowMs,
      })
      .run();
    tx.update(claims).set({ status: "submitted", endedAtMs: nowMs }).where(eq(claims.id, claimId)).run();
    tx.delete(drafts).where(eq(drafts.claimId, claimId)).run();
    const handedIn =
      tx.select({ count: count() }).from(submissions).where(eq(submissions.imageId, claim.imageId)).get()
        ?.count ?? 0;
    if (handedIn >= image.slotsWanted) {
      enqueue(tx, {
        kind: "consensus.settle",
        payload: { imageId: image.id },
        subject: image.batchId,
        // With the count, so that a job still running on fewer submissions does not swallow this one.
        uniqueKey: `settle:${image.id}:${handedIn}`,
        nowMs,
        priority: 4,
      });
    }
    return { submissionId };
  });
}

/** Refuses a drawing that does not fit the batch's key or leaves the image; says which shape and why. */
export function checkDocument(document: DeskDocument, image: ImageRow, key: ClassRow[]): void {
  const byId = new Map(key.map((row) => [row.id, row]));
  const width = image.width ?? 0;
  const height = image.height ?? 0;
  const inside = (x: number, y: number) =>
    x >= -0.01 && y >= -0.01 && x <= width + 0.01 && y <= height + 0.01;
  const ids = new Set<string>();
  document.instances.forEach((instance, index) => {
    const refuse = (why: string) =>
      new AppError("invalid", `Shape ${index + 1}: ${why}`, { [`document/instances/${index}`]: why });
    const kind = byId.get(instance.classId);
    if (!kind) throw refuse("its class is not in the key.");
    // Scores and pay are kept by id: a repeated one would be paid again for each copy.
    if (ids.has(instance.id)) throw refuse("another shape has the same id.");
    ids.add(instance.id);
    if (kind.geometry === "polygon" && instance.shape.kind === "box")
      throw refuse(`"${kind.name}" wants an outline, not a box.`);
    if (instance.shape.kind === "box") {
      const [x, y, w, h] = instance.shape.box;
      if (!inside(x, y) || !inside(x + w, y + h)) throw refuse("it leaves the image.");
    } else if (!instance.shape.rings.every((ring) => ring.every(([x, y]) => inside(x, y)))) {
      throw refuse("it leaves the image.");
    } else if (!(ringsArea(instance.shape.rings) > 0)) {
      throw refuse("its outline has no area.");
    }
  });
}
