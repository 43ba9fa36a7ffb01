import { findRun, type DisputeRow, type SubmissionRow } from "@/db/queries/work";
import type { Reader } from "@/db/client";
import { findDispute } from "@/db/queries/work";
import type { DisputeDecision } from "@/db/schema/work";
import type { AgreedInstance, ImageConsensus, LabelledInstance } from "@/lib/consensus/types";
import { AppError } from "@/lib/errors";
import { boxOfShape } from "@/lib/geometry/box";
import { scoreAgainst } from "@/lib/market/consensus/scoreAgainst";
import type { EvidenceSummary } from "./evidence";

type Decided = {
  dispute: DisputeRow;
  decision: Exclude<DisputeDecision, { outcome: "broken" }>;
  before: ImageConsensus;
  list: readonly SubmissionRow[];
  /** Throws when a drawing does not fit key and image. */
  check: (document: SubmissionRow["document"]) => void;
};

/** The decided labels as a consensus result, with every submission scored against them. */
export function decidedResult(
  db: Reader,
  { dispute, decision, before, list, check }: Decided,
): ImageConsensus {
  if (decision.outcome === "keep")
    return { ...before, verdict: "settled", reason: "Kept as merged by an admin." };
  if (decision.outcome === "restore") {
    const result = findMergedBefore(db, dispute);
    if (!result) throw new AppError("invalid", "Only an appeal can go back to what was merged.");
    return { ...result, verdict: "settled", reason: "Decided on appeal: what was merged first stands." };
  }
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

/** What the engine had merged before the first decision, for an appeal that goes back to it. */
function findMergedBefore(db: Reader, dispute: DisputeRow): ImageConsensus | undefined {
  const first = dispute.appealOf ? findDispute(db, dispute.appealOf) : undefined;
  const { runId } = (first?.evidence ?? {}) as Partial<EvidenceSummary>;
  return runId ? findRun(db, runId)?.result : undefined;
}
