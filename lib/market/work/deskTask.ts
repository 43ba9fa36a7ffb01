import { getDb } from "@/db/client";
import {
  findBatch,
  findBrief,
  findImage,
  findProposals,
  listBriefExamples,
  listClasses,
} from "@/db/queries/batches";
import { findClaim, findDraft, measureBatch } from "@/db/queries/work";
import type { Actor } from "@/lib/auth/actor";
import type { DeskTask } from "@/lib/contracts/desk";
import { AppError, invariant } from "@/lib/errors";
import { batchDealing } from "@/lib/market/proposals/batchDealing";

/** Everything the desk needs to open one claimed image. */
export function deskTask({ actor, claimId }: { actor: Actor; claimId: string }): DeskTask {
  const db = getDb();
  const claim = findClaim(db, claimId);
  if (!claim || claim.annotatorId !== actor.id) throw new AppError("not_found", "There is no such claim.");
  if (claim.status === "submitted") throw new AppError("conflict", "This image was handed in already.");
  if (claim.status === "released") throw new AppError("gone", "You gave this image back.");
  const draft = findDraft(db, claimId);
  return {
    ...imageForDesk(claim.imageId, claim.briefVersion),
    claimId,
    expiresAtMs: claim.expiresAtMs,
    draft: draft?.document ?? null,
    draftVersion: draft?.version ?? 0,
  };
}

/** The part of a desk task that does not depend on a claim: also what an admin redraws a dispute on. */
export function imageForDesk(
  imageId: string,
  briefVersion?: number,
): Omit<DeskTask, "claimId" | "expiresAtMs" | "draft" | "draftVersion"> {
  const db = getDb();
  const image = findImage(db, imageId);
  const batch = image && findBatch(db, image.batchId);
  invariant(image && batch && image.width && image.height, "a claimed image was checked");
  const brief = findBrief(db, batch.id, briefVersion);
  const { dealing, calibration } = batchDealing(db, batch.id);
  return {
    batchTitle: batch.title,
    imageName: image.fileName,
    imageUrl: `/api/images/${image.id}/working`,
    width: image.width,
    height: image.height,
    classes: listClasses(db, batch.id).map(({ id, number, name, colour, geometry }) => ({
      id,
      number,
      name,
      colour,
      geometry,
    })),
    proposals: (findProposals(db, imageId)?.proposals ?? []).map((proposal) => ({
      id: proposal.id,
      classId: proposal.classId,
      shape:
        proposal.rings.length > 0
          ? { kind: "polygon", rings: proposal.rings }
          : { kind: "box", box: proposal.box },
      score: calibration(proposal.score, proposal.source),
    })),
    dealing,
    brief: {
      version: brief?.version ?? 0,
      markdown: brief?.markdown ?? "",
      examples: listBriefExamples(db, batch.id).map(({ imageId: exampleId, caption }) => ({
        url: `/api/images/${exampleId}/thumb`,
        caption,
      })),
    },
    pay: {
      baseCents: batch.baseCents,
      boxCents: batch.boxCents,
      polygonCents: batch.polygonCents,
      capCents: batch.capCents,
    },
    medianSeconds: measureBatch(db, batch.id).medianSeconds,
    sensitive: batch.sensitive,
  };
}
