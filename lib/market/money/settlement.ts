import type { Tx } from "@/db/client";
import { findBatch } from "@/db/queries/batches";
import { balanceOf, findFirstPosting, insertPosting } from "@/db/queries/ledger";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { accountId, type AccountId, type Entry } from "@/lib/ledger/posting";
import { adjustmentPosting, closePosting, fundPosting, releasePosting } from "@/lib/ledger/postings";

type Fund = { actor: Actor; batchId: string; teamId: string; amountCents: number; nowMs: number };

/** Holds a batch's worst-case cost: from the team's wallet into the batch's escrow, once. */
export function fundBatch(tx: Tx, { batchId, teamId, amountCents, nowMs }: Fund): void {
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

const debtOf = (tx: Tx, annotatorId: string) => -balanceOf(tx, accountId("debt", annotatorId));

const centsIn = (entries: readonly Entry[], id: AccountId) =>
  entries.find((entry) => entry.accountId === id)?.cents ?? 0;

type Release = {
  submissionId: string;
  batchId: string;
  annotatorId: string;
  payCents: number;
  feeCents: number;
  nowMs: number;
};

/** Pays a settled submission out of escrow, once. What the annotator owes is settled first. */
export function releaseForSubmission(tx: Tx, { submissionId, nowMs, ...release }: Release): void {
  const { batchId, annotatorId, payCents, feeCents } = release;
  insertPosting(tx, {
    source: "submission",
    sourceId: submissionId,
    kind: "release",
    posting: releasePosting({ ...release, debtCents: debtOf(tx, annotatorId) }),
    isRepeatOf: (first) =>
      centsIn(first, accountId("escrow", batchId)) === -(payCents + feeCents) &&
      centsIn(first, accountId("fee")) === feeCents,
    memo: "Pay for a settled picture",
    nowMs,
  });
}

type Adjust = {
  submissionId: string;
  batchId: string;
  annotatorId: string;
  /** Id of the dispute, or of the consensus run, that changes the pay. */
  cause: string;
  oldPayCents: number;
  oldFeeCents: number;
  newPayCents: number;
  newFeeCents: number;
  nowMs: number;
};

/**
 * Sets right the pay of a submission after a decision, or after a consensus that followed pay by time, by a
 * posting linked to the first. Once a cause. After
 * the batch is closed the difference moves between the annotator and the team's wallet.
 */
export function adjustSubmissionPay(tx: Tx, change: Adjust): void {
  const { submissionId, batchId, annotatorId, cause, nowMs } = change;
  // Work that was found without worth has no release: what raised it is the first.
  const first = findFirstPosting(tx, { source: "submission", sourceId: submissionId });
  invariant(first || change.oldPayCents === 0, "pay that is corrected was posted");
  const payDeltaCents = change.newPayCents - change.oldPayCents;
  const feeDeltaCents = change.newFeeCents - change.oldFeeCents;
  if (payDeltaCents === 0 && feeDeltaCents === 0) return;
  const batch = findBatch(tx, batchId);
  insertPosting(tx, {
    source: "submission",
    sourceId: submissionId,
    kind: `adjust:${cause}`,
    posting: adjustmentPosting({
      batchId,
      annotatorId,
      payDeltaCents,
      feeDeltaCents,
      payableCents: balanceOf(tx, accountId("payable", annotatorId)),
      debtCents: debtOf(tx, annotatorId),
      ...(batch?.status === "closed" && {
        closed: { teamId: batch.teamId, walletCents: balanceOf(tx, accountId("wallet", batch.teamId)) },
      }),
    }),
    isRepeatOf: (entries) =>
      centsIn(entries, accountId("payable", annotatorId)) +
        centsIn(entries, accountId("debt", annotatorId)) ===
        payDeltaCents && centsIn(entries, accountId("fee")) === feeDeltaCents,
    memo: cause.startsWith("run_") ? "Pay raised by a later result" : "Pay corrected by a decision",
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
