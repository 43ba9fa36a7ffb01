import { eq } from "drizzle-orm";
import type { Tx } from "@/db/client";
import type { BatchRow, ClassRow, ImageRow } from "@/db/queries/batches";
import { balanceOf, entriesOf, findPosting, insertPosting } from "@/db/queries/ledger";
import type { DisputeRow, SubmissionRow } from "@/db/queries/work";
import { images, submissions } from "@/db/schema";
import type { Fault } from "@/db/schema/work";
import { accountId } from "@/lib/ledger/posting";
import { goodwillPosting } from "@/lib/ledger/postings";
import { adjustSubmissionPay, releaseForSubmission } from "@/lib/market/money/settlement";
import { brokenPay } from "./brokenPay";

type Broken = {
  dispute: DisputeRow;
  batch: BatchRow;
  image: ImageRow;
  key: readonly ClassRow[];
  list: readonly SubmissionRow[];
  fault: Fault;
  nowMs: number;
};

/**
 * A task that the brief, the picture or the product broke: the picture leaves the batch, nobody has a score
 * for it, and everybody is paid for the work. Where the product was at fault, the team gets that pay back from
 * the platform. Returns the cents by which pay rose in sum.
 */
export function setAside(tx: Tx, { dispute, batch, image, key, list, fault, nowMs }: Broken): number {
  const due = brokenPay(batch, key, list, fault);
  let movedCents = 0;
  list.forEach((submission, index) => {
    const { payCents, feeCents } = due[index] ?? { payCents: 0, feeCents: 0 };
    const parties = { submissionId: submission.id, batchId: batch.id, annotatorId: submission.annotatorId };
    if (submission.payCents === null) {
      if (payCents > 0) releaseForSubmission(tx, { ...parties, payCents, feeCents, nowMs });
    } else {
      adjustSubmissionPay(tx, {
        ...parties,
        cause: dispute.id,
        oldPayCents: submission.payCents,
        oldFeeCents: submission.feeCents ?? 0,
        newPayCents: payCents,
        newFeeCents: feeCents,
        nowMs,
      });
    }
    movedCents += payCents - (submission.payCents ?? 0);
    tx.update(submissions)
      .set({ scoredRunId: null, quality: null, payCents, feeCents, paidAtMs: submission.paidAtMs ?? nowMs })
      .where(eq(submissions.id, submission.id))
      .run();
  });
  tx.update(images).set({ consensusState: "void", settledAtMs: null }).where(eq(images.id, image.id)).run();
  const paidCents = due.reduce((sum, row) => sum + row.payCents, 0);
  if (fault === "product" && paidCents > 0)
    insertPosting(tx, {
      source: "dispute",
      sourceId: dispute.id,
      kind: "goodwill",
      posting: goodwillPosting(batch.teamId, paidCents),
      memo: "Given back for a picture that the product broke",
      nowMs,
    });
  return movedCents;
}

/**
 * An appeal changes what a first decision said: what the platform gave for it goes back, by a posting linked to
 * it and as far as the wallet has it. Does nothing where nothing was given, or it went back already.
 */
export function takeGoodwillBack(
  tx: Tx,
  { firstId, batch, nowMs }: { firstId: string; batch: BatchRow; nowMs: number },
): void {
  const given = findPosting(tx, { source: "dispute", sourceId: firstId, kind: "goodwill" });
  if (!given) return;
  const wallet = accountId("wallet", batch.teamId);
  const givenCents = entriesOf(tx, given.id).find((entry) => entry.accountId === wallet)?.cents ?? 0;
  const cents = Math.min(givenCents, balanceOf(tx, wallet));
  if (cents <= 0) return;
  insertPosting(tx, {
    source: "dispute",
    sourceId: firstId,
    kind: "goodwill-back",
    posting: goodwillPosting(batch.teamId, -cents),
    isRepeatOf: () => true,
    memo: "Taken back after an appeal",
    linkedTo: given.id,
    nowMs,
  });
}
