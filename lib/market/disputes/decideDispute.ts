import { and, eq, inArray } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findBatch, findImage, listClasses } from "@/db/queries/batches";
import { getTeamRole } from "@/db/queries/people";
import {
  findDispute,
  findRun,
  listSubmissionsOf,
  type DisputeRow,
  type SubmissionRow,
} from "@/db/queries/work";
import { disputes, teamMembers, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { AgreedInstance, ImageConsensus, LabelledInstance } from "@/lib/consensus/types";
import type { DecideInput } from "@/lib/contracts/work";
import { AppError, invariant } from "@/lib/errors";
import { boxOfShape } from "@/lib/geometry/box";
import { tellIfAllSettled } from "@/lib/market/batches/batchLetters";
import { audit } from "@/lib/market/audit";
import { scoreAgainst } from "@/lib/market/consensus/scoreAgainst";
import { applyScores, recordRun, settingsOf, settle } from "@/lib/market/consensus/settleImage";
import { post } from "@/lib/market/mail";
import { checkDocument } from "@/lib/market/work/submitWork";

type Input = { actor: Actor; nowMs: number; disputeId: string; decision: DecideInput };

/**
 * An admin's decision: keep the consensus, take one submission, or the labels redrawn on the desk. The
 * image is settled by a run of its own, every submission is scored against it, pay is set right by postings
 * linked to the first ones, and everybody concerned gets the reason by mail. All in one transaction, once.
 */
export function decideDispute({ actor, nowMs, disputeId, decision }: Input): { movedCents: number } {
  return inTransaction(getDb(), (tx) => {
    const dispute = findDispute(tx, disputeId);
    if (!dispute) throw new AppError("not_found", "There is no such dispute.");
    if (dispute.status !== "open") throw new AppError("conflict", "This dispute was decided already.");
    const batch = findBatch(tx, dispute.batchId);
    const image = findImage(tx, dispute.imageId);
    const before = image?.currentRunId ? findRun(tx, image.currentRunId) : undefined;
    invariant(batch && image && before, "a dispute has a batch, an image and a run");
    const list = listSubmissionsOf(tx, image.id);
    const tookPart =
      dispute.openedBy === actor.id ||
      list.some((submission) => submission.annotatorId === actor.id) ||
      getTeamRole(tx, batch.teamId, actor.id) !== undefined;
    if (tookPart)
      throw new AppError("forbidden", "You took part in what is disputed; another admin decides it.");
    const key = listClasses(tx, batch.id);
    const settings = settingsOf(batch, key);
    const result = decidedResult({
      decision,
      before: before.result,
      list,
      check: (doc) => checkDocument(doc, image, key),
    });
    const keepsScores = decision.outcome === "keep" && dispute.kind !== "split";
    let movedCents = 0;
    if (!keepsScores) {
      const runId = recordRun(tx, {
        image,
        origin: "decision",
        disputeId,
        submissionList: list,
        settings,
        result,
        millis: 0,
        nowMs,
      });
      settle(tx, { image, runId, nowMs });
      if (dispute.kind === "split") tellIfAllSettled(tx, batch, nowMs);
      movedCents = applyScores(tx, { batch, key, list, scores: result.scores, runId, disputeId, nowMs });
    }
    const { reason, ...outcome } = decision;
    tx.update(disputes)
      .set({
        status: "decided",
        decision: outcome,
        decisionReason: reason,
        decidedBy: actor.id,
        decidedAtMs: nowMs,
        movedCents,
      })
      .where(eq(disputes.id, disputeId))
      .run();
    // The image has one truth now; what else was contested about it is answered by the same decision.
    if (!keepsScores) closeSiblings(tx, { dispute, actor, reason, nowMs });
    audit(tx, {
      actorId: actor.id,
      action: "dispute.decided",
      subject: disputeId,
      detail: { outcome: decision.outcome, reason, movedCents },
      nowMs,
    });
    tellEverybody(tx, {
      dispute,
      list,
      fileName: image.fileName,
      batchTitle: batch.title,
      teamId: batch.teamId,
      outcome: decision.outcome,
      reason,
      nowMs,
    });
    return { movedCents };
  });
}

type Decided = {
  decision: DecideInput;
  before: ImageConsensus;
  list: readonly SubmissionRow[];
  check: (document: SubmissionRow["document"]) => void;
};

/** The decided labels as a consensus result, with every submission scored against them. */
function decidedResult({ decision, before, list, check }: Decided): ImageConsensus {
  if (decision.outcome === "keep")
    return { ...before, verdict: "settled", reason: "Kept as merged by an admin." };
  let labels: readonly LabelledInstance[];
  if (decision.outcome === "pick") {
    const picked = list.find((submission) => submission.id === decision.submissionId);
    if (!picked)
      throw new AppError("invalid", "The picked submission is not of this image.", {
        submissionId: "Not of this image.",
      });
    labels = picked.document.instances;
  } else {
    check(decision.document);
    labels = decision.document.instances;
  }
  const scores = list.map(({ annotatorId, document }) =>
    scoreAgainst(annotatorId, document.instances, labels),
  );
  const agreed = labels.map((label): AgreedInstance => {
    const members = list.flatMap(({ annotatorId, document }) => {
      const [score] = scoreAgainst(annotatorId, document.instances, [label]).instances.filter(
        (entry) => entry.outcome === "agreed",
      );
      return score ? [{ annotatorId, instanceId: score.instanceId, iou: score.iou ?? 0 }] : [];
    });
    const meanIou =
      members.length > 0 ? members.reduce((sum, member) => sum + member.iou, 0) / members.length : 0;
    return {
      classId: label.classId,
      shape: label.shape,
      box: boxOfShape(label.shape),
      score: 1,
      classProbability: 1,
      predictedIou: 1,
      support: members.length,
      seen: list.length,
      spread: members.length > 0 ? 1 - meanIou : 0,
      crowd: label.crowd ?? false,
      members,
      why: decision.outcome === "pick" ? "From the submission that an admin picked." : "Drawn by an admin.",
    };
  });
  return {
    agreed,
    leftOut: [],
    scores,
    agreement: scores.length > 0 ? scores.reduce((sum, score) => sum + score.quality, 0) / scores.length : 1,
    predictedQuality: { value: 1, low: 1, high: 1 },
    verdict: "settled",
    reason:
      decision.outcome === "pick" ? "Decided: one submission was picked." : "Decided: redrawn by an admin.",
  };
}

function closeSiblings(
  tx: Tx,
  { dispute, actor, reason, nowMs }: { dispute: DisputeRow; actor: Actor; reason: string; nowMs: number },
): void {
  tx.update(disputes)
    .set({
      status: "decided",
      decision: { outcome: "keep" },
      decisionReason: reason,
      decidedBy: actor.id,
      decidedAtMs: nowMs,
      movedCents: 0,
    })
    .where(and(eq(disputes.imageId, dispute.imageId), eq(disputes.status, "open")))
    .run();
}

type Letter = {
  dispute: DisputeRow;
  list: readonly SubmissionRow[];
  fileName: string;
  batchTitle: string;
  teamId: string;
  outcome: DecideInput["outcome"];
  reason: string;
  nowMs: number;
};

const SAID: Record<DecideInput["outcome"], string> = {
  keep: "The labels stay as the annotators' agreement has them.",
  pick: "One annotator's labels were taken as they are.",
  redraw: "The image was drawn anew.",
};

function tellEverybody(
  tx: Tx,
  { dispute, list, fileName, batchTitle, teamId, outcome, reason, nowMs }: Letter,
): void {
  const lines = [
    `A dispute about ${fileName} (${batchTitle}) was decided.`,
    SAID[outcome],
    `The reason: ${reason}`,
  ];
  const annotatorIds = [...new Set(list.map((submission) => submission.annotatorId))];
  const annotators =
    annotatorIds.length > 0 ? tx.select().from(users).where(inArray(users.id, annotatorIds)).all() : [];
  for (const person of annotators) {
    const own = list.find((submission) => submission.annotatorId === person.id);
    post(
      tx,
      {
        to: person.email,
        subject: `Decided: ${fileName}`,
        lines,
        action: { label: "See your score", path: `/work/${own?.id ?? ""}` },
        tag: "decision",
      },
      nowMs,
    );
  }
  const members = tx
    .select({ email: users.email })
    .from(teamMembers)
    .innerJoin(users, eq(users.id, teamMembers.userId))
    .where(and(eq(teamMembers.teamId, teamId), inArray(teamMembers.role, ["owner", "editor"])))
    .all();
  for (const { email } of members) {
    post(
      tx,
      {
        to: email,
        subject: `Decided: ${fileName}`,
        lines,
        action: { label: "See the image", path: `/batches/${dispute.batchId}/images/${dispute.imageId}` },
        tag: "decision",
      },
      nowMs,
    );
  }
}
