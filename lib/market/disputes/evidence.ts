import { createHash } from "node:crypto";
import { asc, eq, inArray } from "drizzle-orm";
import type { Reader, Tx } from "@/db/client";
import { findBrief, listClasses, type BatchRow, type ImageRow } from "@/db/queries/batches";
import { listRuns, listSubmissionsOf } from "@/db/queries/work";
import { claims, disputeEvidence, disputes, proposalSets } from "@/db/schema";
import { invariant } from "@/lib/errors";

const sha256 = (text: string) => createHash("sha256").update(text, "utf8").digest("hex");

type Frozen = {
  disputeId: string;
  batch: BatchRow;
  image: ImageRow;
  runId: string | null;
  /** The contested submission; null when the whole image is contested. */
  submissionId: string | null;
  nowMs: number;
};

/**
 * All that a decision is made on, as it is at this moment: the image by its hash, every submission with every
 * outline and its timing, every consensus run with settings and result, the proposals dealt, and each version
 * of the brief that somebody was shown. Brief first shown to the contested person, else to the first person.
 */
function snapshotOf(tx: Tx, { disputeId, batch, image, runId, submissionId, nowMs }: Frozen) {
  const list = listSubmissionsOf(tx, image.id);
  const claimIds = list.map((submission) => submission.claimId);
  const claimOf = new Map(
    claimIds.length === 0
      ? []
      : tx
          .select()
          .from(claims)
          .where(inArray(claims.id, claimIds))
          .all()
          .map((claim) => [claim.id, claim]),
  );
  const submissions = list.map((submission) => {
    const claim = claimOf.get(submission.claimId);
    invariant(claim, "a submission has a claim");
    const { id, annotatorId, document, activeSeconds, submittedAtMs, payCents, feeCents, quality } =
      submission;
    return {
      id,
      annotatorId,
      sha256: submission.sha256,
      briefVersion: claim.briefVersion,
      timing: { claimedAtMs: claim.claimedAtMs, submittedAtMs, activeSeconds },
      payCents,
      feeCents,
      quality,
      document,
    };
  });
  const judged = submissions.find((submission) => submission.id === submissionId) ?? submissions[0];
  const briefVersion = judged?.briefVersion ?? batch.briefVersion;
  const shown = [
    ...new Set([...submissions.map((row) => row.briefVersion), briefVersion, batch.briefVersion]),
  ];
  const proposals = tx.select().from(proposalSets).where(eq(proposalSets.imageId, image.id)).get();
  return {
    format: "merestone dispute evidence, version 1",
    disputeId,
    frozenAtMs: nowMs,
    image: {
      id: image.id,
      fileName: image.fileName,
      uploadSha256: image.sha256,
      mediaType: image.mediaType,
      workingKey: image.workingKey,
      width: image.width,
      height: image.height,
    },
    batch: {
      id: batch.id,
      title: batch.title,
      kMin: batch.kMin,
      kMax: batch.kMax,
      agreementTarget: batch.agreementTarget,
      baseCents: batch.baseCents,
      boxCents: batch.boxCents,
      polygonCents: batch.polygonCents,
      capCents: batch.capCents,
      feeBps: batch.feeBps,
      disputeWindowHours: batch.disputeWindowHours,
    },
    key: listClasses(tx, batch.id).map(({ id, number, name, geometry }) => ({ id, number, name, geometry })),
    briefVersion,
    currentBriefVersion: batch.briefVersion,
    briefs: shown
      .sort((a, b) => a - b)
      .map((version) => ({ version, markdown: findBrief(tx, batch.id, version)?.markdown ?? "" })),
    runId,
    runs: listRuns(tx, image.id).map(
      ({ id, origin, disputeId: by, verdict, agreement, settings, submissionIds, result, createdAtMs }) => ({
        id,
        origin,
        disputeId: by,
        verdict,
        agreement,
        settings,
        submissionIds,
        result,
        createdAtMs,
      }),
    ),
    submissions,
    proposals: proposals ? { model: proposals.model, proposals: proposals.proposals } : null,
    earlier: tx
      .select()
      .from(disputes)
      .where(eq(disputes.imageId, image.id))
      .orderBy(asc(disputes.openedAtMs), asc(disputes.id))
      .all()
      .filter((dispute) => dispute.status === "decided")
      .map(({ id, decision, decisionReason, decidedBy, decidedAtMs }) => ({
        id,
        decision,
        decisionReason,
        decidedBy,
        decidedAtMs,
      })),
  };
}

export type Snapshot = ReturnType<typeof snapshotOf>;

/** What of the evidence stands in the dispute's own row, for lists and the desk. */
export type EvidenceSummary = { runId: string | null; briefVersion: number; sha256: string };

/** Takes the snapshot in the transaction that opens the dispute; `keep` stores it once the dispute's row is there. */
export function freezeEvidence(tx: Tx, frozen: Frozen): { summary: EvidenceSummary; keep: () => void } {
  const { briefVersion, ...rest } = snapshotOf(tx, frozen);
  const snapshot = JSON.stringify({ briefVersion, ...rest });
  const hash = sha256(snapshot);
  return {
    summary: { runId: frozen.runId, briefVersion, sha256: hash },
    keep: () => {
      const row = { disputeId: frozen.disputeId, snapshot, sha256: hash, frozenAtMs: frozen.nowMs };
      tx.insert(disputeEvidence).values(row).run();
    },
  };
}

export type Evidence = {
  snapshot: Snapshot;
  text: string;
  sha256: string;
  /** Whether the stored text still has the hash that it was frozen with. */
  isIntact: boolean;
};

/** The evidence as it was frozen; undefined for a dispute that was opened before evidence was kept whole. */
export function findEvidence(db: Reader, disputeId: string): Evidence | undefined {
  const row = db.select().from(disputeEvidence).where(eq(disputeEvidence.disputeId, disputeId)).get();
  if (!row) return undefined;
  // Written by snapshotOf above and protected by a trigger; the hash shows any change.
  const snapshot = JSON.parse(row.snapshot) as Snapshot;
  return { snapshot, text: row.snapshot, sha256: row.sha256, isIntact: sha256(row.snapshot) === row.sha256 };
}
