import type { Tx } from "@/db/client";
import { balanceOf, findPosting, insertPosting } from "@/db/queries/ledger";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { accountId } from "@/lib/ledger/posting";
import { adjustmentPosting, closePosting, fundPosting, releasePosting } from "@/lib/ledger/postings";

/** Holds a batch's worst-case cost: from the team's wallet into the batch's escrow, once. */
export function fundBatch(
  tx: Tx,
  {
    batchId,
    teamId,
    amountCents,
    nowMs,
  }: { actor: Actor; batchId: string; teamId: string; amountCents: number; nowMs: number },
): void {
  if (balanceOf(tx, accountId("wallet", teamId)) < amountCents) {
    throw new AppError("conflict", "The wallet does not hold enough. Top it up first.");
  }
  insertPosting(tx, {
    source: "batch",
    sourceId: batchId,
    kind: "fund",
    posting: fundPosting(teamId, batchId, amountCents),
    memo: "Held for a batch",
    nowMs,
  });
}

type Release = {
  submissionId: string;
  batchId: string;
  annotatorId: string;
  payCents: number;
  feeCents: number;
  nowMs: number;
};

/** Pays a settled submission out of escrow, once. */
export function releaseForSubmission(tx: Tx, { submissionId, nowMs, ...release }: Release): void {
  insertPosting(tx, {
    source: "submission",
    sourceId: submissionId,
    kind: "release",
    posting: releasePosting(release),
    memo: "Pay for a settled picture",
    nowMs,
  });
}

type Adjust = {
  submissionId: string;
  batchId: string;
  annotatorId: string;
  disputeId: string;
  oldPayCents: number;
  oldFeeCents: number;
  newPayCents: number;
  newFeeCents: number;
  nowMs: number;
};

/** Sets right the pay of a submission after a decision, by a posting linked to the first. Once a dispute. */
export function adjustSubmissionPay(tx: Tx, change: Adjust): void {
  const { submissionId, batchId, annotatorId, disputeId, nowMs } = change;
  const first = findPosting(tx, { source: "submission", sourceId: submissionId, kind: "release" });
  invariant(first || change.oldPayCents === 0, "pay that is corrected was posted");
  const posting = adjustmentPosting({
    batchId,
    annotatorId,
    payDeltaCents: change.newPayCents - change.oldPayCents,
    feeDeltaCents: change.newFeeCents - change.oldFeeCents,
    payableCents: balanceOf(tx, accountId("payable", annotatorId)),
    debtCents: -balanceOf(tx, accountId("debt", annotatorId)),
  });
  insertPosting(tx, {
    source: "submission",
    sourceId: submissionId,
    kind: `adjust:${disputeId}`,
    posting,
    memo: "Pay corrected by a decision",
    linkedTo: first?.id ?? null,
    nowMs,
  });
}

/** Gives what is left in a batch's escrow back to the wallet. Returns the cents. */
export function closeBatchEscrow(
  tx: Tx,
  { batchId, teamId, nowMs }: { batchId: string; teamId: string; nowMs: number },
): number {
  const left = balanceOf(tx, accountId("escrow", batchId));
  if (left > 0) {
    insertPosting(tx, {
      source: "batch",
      sourceId: batchId,
      kind: "close",
      posting: closePosting(teamId, batchId, left),
      memo: "Unspent money of a batch",
      nowMs,
    });
  }
  return left;
}
