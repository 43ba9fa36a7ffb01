import { and, eq, ne } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { findBatch, findImage, listClasses, type BatchRow, type ImageRow } from "@/db/queries/batches";
import { findDispute, findRun, listSubmissionsOf, type DisputeRow, type RunRow } from "@/db/queries/work";
import { disputes } from "@/db/schema";
import type { DisputeDecision } from "@/db/schema/work";
import type { Actor } from "@/lib/auth/actor";
import type { ConfirmInput, DecideInput } from "@/lib/contracts/work";
import { env } from "@/lib/env";
import { AppError, invariant } from "@/lib/errors";
import { tellIfAllSettled } from "@/lib/market/batches/batchLetters";
import { audit } from "@/lib/market/audit";
import { applyScores, recordRun, settingsOf, settle } from "@/lib/market/consensus/settleImage";
import { checkDocument } from "@/lib/market/work/submitWork";
import { decidedResult } from "./decidedResult";
import { requireImpartial } from "./impartial";
import { listPartiesOf } from "./parties";
import { setAside, takeGoodwillBack } from "./setAside";
import { noteStep } from "./steps";
import { tellAdmins, tellParties } from "./tell";

type Input = { actor: Actor; nowMs: number; disputeId: string; decision: DecideInput };

export type DecideOutcome = { state: "decided" | "proposed"; movedCents: number };

/** Whether so much is at stake that two admins must agree. */
export const takesTwo = ({ stakeCents }: Pick<DisputeRow, "stakeCents">) =>
  stakeCents >= env().DISPUTE_TWO_ADMINS_CENTS;

/**
 * An admin's decision, with its reason and the earlier decisions it follows. Below the money limit it takes
 * effect at once; above it, it is a proposal that another admin confirms or sends back. One transaction, once.
 */
export function decideDispute({ actor, nowMs, disputeId, decision: input }: Input): DecideOutcome {
  return inTransaction(getDb(), (tx) => {
    const scene = load(tx, disputeId);
    const { dispute } = scene;
    requireImpartial(tx, dispute, actor.id);
    if (dispute.proposal)
      throw new AppError(
        "conflict",
        "A proposal waits for another admin; it is confirmed or sent back first.",
      );
    const { reason, citedIds = [], ...decision } = input;
    requireDecisions(tx, dispute, citedIds);
    if (!takesTwo(dispute)) {
      tx.update(disputes).set({ citedIds }).where(eq(disputes.id, disputeId)).run();
      const movedCents = carryOut(tx, scene, { decision, reason, by: actor.id, confirmedBy: null, nowMs });
      return { state: "decided", movedCents };
    }
    check(tx, scene, decision);
    tx.update(disputes)
      .set({
        proposal: decision,
        proposalReason: reason,
        proposedBy: actor.id,
        proposedAtMs: nowMs,
        citedIds,
      })
      .where(eq(disputes.id, disputeId))
      .run();
    noteStep(tx, { disputeId, kind: "proposed", actorId: actor.id, reason, nowMs });
    audit(tx, {
      actorId: actor.id,
      action: "dispute.proposed",
      subject: disputeId,
      detail: { outcome: decision.outcome, reason, citedIds },
      nowMs,
    });
    tellAdmins(tx, dispute, {
      subject: `To confirm: ${scene.image.fileName}`,
      lines: [
        `${actor.name ?? "An admin"} proposes a decision about ${scene.image.fileName} (${scene.batch.title}). So much is at stake that a second admin must agree.`,
        SAID[decision.outcome],
        `The reason: ${reason}`,
      ],
      label: "Confirm it or send it back",
      except: actor.id,
      nowMs,
    });
    return { state: "proposed", movedCents: 0 };
  });
}

type Confirm = { actor: Actor; nowMs: number; disputeId: string; answer: ConfirmInput };

/**
 * The second admin's answer to a proposal: it takes effect, or it goes back with a reason. Whoever proposed may
 * only take it back. A proposal that was replaced since it was read is a conflict.
 */
export function confirmProposal({ actor, nowMs, disputeId, answer }: Confirm): DecideOutcome {
  return inTransaction(getDb(), (tx) => {
    const scene = load(tx, disputeId);
    const { dispute } = scene;
    const { proposal, proposedBy, proposalReason } = dispute;
    if (!proposal || !proposedBy || dispute.proposedAtMs !== answer.proposedAtMs)
      throw new AppError("conflict", "This proposal is not there any more. Look at the dispute again.");
    requireImpartial(tx, dispute, actor.id);
    if (answer.verdict === "confirm") {
      if (proposedBy === actor.id)
        throw new AppError("forbidden", "You proposed this; another admin confirms it.");
      noteStep(tx, { disputeId, kind: "confirmed", actorId: actor.id, nowMs });
      const movedCents = carryOut(tx, scene, {
        decision: proposal,
        reason: proposalReason ?? "",
        by: proposedBy,
        confirmedBy: actor.id,
        nowMs,
      });
      return { state: "decided", movedCents };
    }
    tx.update(disputes)
      .set({ proposal: null, proposalReason: null, proposedBy: null, proposedAtMs: null, citedIds: [] })
      .where(eq(disputes.id, disputeId))
      .run();
    noteStep(tx, { disputeId, kind: "sent-back", actorId: actor.id, reason: answer.reason, nowMs });
    audit(tx, {
      actorId: actor.id,
      action: "dispute.sentBack",
      subject: disputeId,
      detail: { proposedBy, reason: answer.reason },
      nowMs,
    });
    tellAdmins(tx, dispute, {
      subject: `Sent back: ${scene.image.fileName}`,
      lines: [`The proposal about ${scene.image.fileName} was sent back.`, `The reason: ${answer.reason}`],
      label: "Look again",
      except: actor.id,
      nowMs,
    });
    return { state: "proposed", movedCents: 0 };
  });
}

type Scene = { dispute: DisputeRow; batch: BatchRow; image: ImageRow; before: RunRow };

function load(tx: Tx, disputeId: string): Scene {
  const dispute = findDispute(tx, disputeId);
  if (!dispute) throw new AppError("not_found", "There is no such dispute.");
  if (dispute.status !== "open") throw new AppError("conflict", "This dispute was decided already.");
  const batch = findBatch(tx, dispute.batchId);
  const image = findImage(tx, dispute.imageId);
  const before = image?.currentRunId ? findRun(tx, image.currentRunId) : undefined;
  invariant(batch && image && before, "a dispute has a batch, an image and a run");
  return { dispute, batch, image, before };
}

/** What is cited was decided, and is not this dispute itself. */
function requireDecisions(tx: Tx, dispute: DisputeRow, citedIds: readonly string[]): void {
  for (const id of citedIds) {
    if (id === dispute.id || findDispute(tx, id)?.status !== "decided")
      throw new AppError("invalid", "Only decided disputes can be cited.", { citedIds: "Not a decision." });
  }
}

/** The result that a decision gives; throws when the decision does not fit the picture. */
function check(tx: Tx, { dispute, batch, image, before }: Scene, decision: DisputeDecision) {
  if (decision.outcome === "broken") return undefined;
  const key = listClasses(tx, batch.id);
  return decidedResult(tx, {
    dispute,
    decision,
    before: before.result,
    list: listSubmissionsOf(tx, image.id),
    check: (document) => checkDocument(document, image, key),
  });
}

type Order = {
  decision: DisputeDecision;
  reason: string;
  by: string;
  confirmedBy: string | null;
  nowMs: number;
};

/**
 * Carries a decision out: the image is settled by a run of its own (or set aside), every submission is scored
 * against it, pay is set right by postings linked to the first ones, and everybody concerned gets the reason.
 * Returns the cents by which pay rose in sum.
 */
function carryOut(tx: Tx, scene: Scene, { decision, reason, by, confirmedBy, nowMs }: Order): number {
  const { dispute, batch, image } = scene;
  const disputeId = dispute.id;
  const list = listSubmissionsOf(tx, image.id);
  const key = listClasses(tx, batch.id);
  // To keep what is settled changes nothing; to keep a split picture settles it, unless that was done before.
  const changesNothing =
    decision.outcome === "keep" && (dispute.kind !== "split" || dispute.appealOf !== null);
  let movedCents = 0;
  if (!changesNothing && dispute.appealOf) takeGoodwillBack(tx, { firstId: dispute.appealOf, batch, nowMs });
  if (decision.outcome === "broken") {
    movedCents = setAside(tx, { dispute, batch, image, key, list, fault: decision.fault, nowMs });
    if (image.consensusState === "split") tellIfAllSettled(tx, batch, nowMs);
  } else if (!changesNothing) {
    const result = check(tx, scene, decision);
    invariant(result, "a decision that is not 'broken' has a result");
    const settings = settingsOf(batch, key);
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
    if (image.consensusState === "split") tellIfAllSettled(tx, batch, nowMs);
    movedCents = applyScores(tx, { batch, key, list, scores: result.scores, runId, disputeId, nowMs });
  }
  const verdict = {
    status: "decided",
    decision,
    decisionReason: reason,
    decidedBy: by,
    confirmedBy,
    decidedAtMs: nowMs,
  } as const;
  tx.update(disputes)
    .set({ ...verdict, movedCents })
    .where(eq(disputes.id, disputeId))
    .run();
  noteStep(tx, { disputeId, kind: "decided", actorId: by, reason, nowMs });
  // The image has one truth now; what else was contested about it is answered by the same decision.
  if (!changesNothing) closeSiblings(tx, dispute, { ...verdict, decision: { outcome: "keep" } });
  audit(tx, {
    actorId: confirmedBy ?? by,
    action: "dispute.decided",
    subject: disputeId,
    detail: { outcome: decision.outcome, reason, movedCents, ...(confirmedBy && { proposedBy: by }) },
    nowMs,
  });
  const decided = findDispute(tx, disputeId);
  invariant(decided, "the dispute is there");
  tellParties(tx, listPartiesOf(tx, decided), {
    subject: `Decided: ${image.fileName}`,
    lines: [
      `${dispute.appealOf ? "The appeal" : "A dispute"} about ${image.fileName} (${batch.title}) was decided.`,
      SAID[decision.outcome],
      `The reason: ${reason}`,
      ...(decided.citedIds.length > 0
        ? [
            `It follows ${decided.citedIds.length} earlier ${decided.citedIds.length === 1 ? "decision" : "decisions"} of the same kind.`,
          ]
        : []),
      dispute.appealOf
        ? "This decision is final here. What the law of your place gives you beyond it is yours."
        : `You can appeal within ${batch.disputeWindowHours} hours; another admin decides then.`,
    ],
    tag: "decision",
    nowMs,
  });
  return movedCents;
}

type Verdict = Pick<
  typeof disputes.$inferInsert,
  "decision" | "decisionReason" | "decidedBy" | "confirmedBy" | "decidedAtMs"
>;

function closeSiblings(tx: Tx, dispute: DisputeRow, verdict: Verdict): void {
  const siblings = tx
    .update(disputes)
    .set({ ...verdict, status: "decided", movedCents: 0 })
    .where(
      and(eq(disputes.imageId, dispute.imageId), eq(disputes.status, "open"), ne(disputes.id, dispute.id)),
    )
    .returning({ id: disputes.id })
    .all();
  for (const { id } of siblings)
    noteStep(tx, {
      disputeId: id,
      kind: "decided",
      actorId: verdict.decidedBy ?? null,
      reason: "Answered by another decision about the same picture.",
      nowMs: verdict.decidedAtMs ?? 0,
    });
}

const SAID: Record<DisputeDecision["outcome"], string> = {
  keep: "The labels stay as they are.",
  restore: "What the annotators' agreement had first stands again.",
  pick: "One annotator's labels were taken as they are.",
  redraw: "The picture was drawn anew.",
  broken:
    "The picture was set aside: the brief, the picture or the product was at fault. It counts against nobody, and everybody's work on it is paid.",
};
