import { and, eq, inArray, lte, sql } from "drizzle-orm";
import Stripe from "stripe";
import { getDb } from "@/db/client";
import { disputes, jobs, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { DecideInput } from "@/lib/contracts/work";
import type { DeskDocument } from "@/lib/contracts/desk";
import { InvariantError } from "@/lib/errors";
import { payoutRunJob } from "@/lib/jobs/handlers/payoutRun";
import { payoutsScheduleJob } from "@/lib/jobs/handlers/payoutsSchedule";
import { reconcileJob } from "@/lib/jobs/handlers/reconcile";
import { refundRunJob } from "@/lib/jobs/handlers/refundRun";
import { sendMailJob } from "@/lib/jobs/handlers/sendMail";
import { settleImageJob } from "@/lib/jobs/handlers/settleImage";
import { settleOverdueJob } from "@/lib/jobs/handlers/settleOverdue";
import { stripeEventJob } from "@/lib/jobs/handlers/stripeEvent";
import { sweepClaimsJob } from "@/lib/jobs/handlers/sweepClaims";
import { enqueue, takeJob } from "@/lib/jobs/queue";
import { runJob, type Handlers } from "@/lib/jobs/runJob";
import { closeBatch } from "@/lib/market/batches/closeBatch";
import { setAgreementTarget } from "@/lib/market/batches/editBatch";
import { setPaused } from "@/lib/market/batches/publishBatch";
import { appealDecision } from "@/lib/market/disputes/appeal";
import { confirmProposal, decideDispute } from "@/lib/market/disputes/decideDispute";
import { listImpartialAdmins } from "@/lib/market/disputes/impartial";
import { contestImage, contestScore, withdrawDispute } from "@/lib/market/disputes/openDispute";
import type { PayoutScheduleInput } from "@/lib/contracts/payments";
import { setPayoutSchedule } from "@/lib/market/money/payoutSchedule";
import { refreshOnboarding, requestPayout, startOnboarding } from "@/lib/market/money/payouts";
import { reconcile } from "@/lib/market/money/reconcile";
import { refundWallet } from "@/lib/market/money/refunds";
import { receiveStripeEvent } from "@/lib/market/money/stripeEvents";
import { startTopUp } from "@/lib/market/money/topUp";
import { claimTask } from "@/lib/market/work/claimTask";
import { heartbeat, releaseClaim, saveDraft } from "@/lib/market/work/keepClaim";
import { submitWork } from "@/lib/market/work/submitWork";
import { listClasses } from "@/db/queries/batches";
import { findDispute, listLiveClaims, listSubmissionsOf, type DisputeRow } from "@/db/queries/work";
import { draftBatch, imagesOf, person, publish, team, type PAY } from "@/tests/support/market";

/** The work of the background that needs no pixels; learning from settled pictures is left out. */
const HANDLERS: Handlers = {
  "mail.send": sendMailJob,
  "consensus.settle": settleImageJob,
  "claims.sweep": sweepClaimsJob,
  "payout.run": payoutRunJob,
  "refund.run": refundRunJob,
  "stripe.event": stripeEventJob,
  "ledger.reconcile": reconcileJob,
  "payouts.schedule": payoutsScheduleJob,
  "consensus.overdue": settleOverdueJob,
  "batch.train": async () => undefined,
};

type By = { actor: Actor };
type Draft = By & {
  teamId: string;
  imageCount: number;
  kMin: number;
  kMax: number;
  agreementTarget: number;
  pay: typeof PAY;
};

/** What a driver can ask of the product: the use cases themselves, each with the moment in which it is asked. */
export const OPERATIONS = {
  person: ({ role, name }: { role: "requester" | "annotator" | "admin"; name: string }) =>
    person(getDb(), role, { name, email: `${name}@skerrow.example` }),
  team: ({ actor }: By) => team(getDb(), actor),

  draft(input: Draft, nowMs: number) {
    const { actor, teamId, ...options } = input;
    const batchId = draftBatch(getDb(), actor, teamId, { ...options, nowMs });
    return {
      batchId,
      imageIds: imagesOf(getDb(), batchId).map(({ id }) => id),
      classIds: listClasses(getDb(), batchId).map(({ id }) => id),
    };
  },
  publish: ({ actor, batchId }: By & { batchId: string }, nowMs: number) =>
    publish(getDb(), actor, batchId, nowMs),
  pause: (input: By & { batchId: string; paused: boolean }, nowMs: number) => setPaused({ ...input, nowMs }),
  close: (input: By & { batchId: string }, nowMs: number) => closeBatch({ ...input, nowMs }),
  target: (input: By & { batchId: string; target: number }, nowMs: number) =>
    setAgreementTarget({ ...input, nowMs }),

  claim: (input: By & { batchId: string; imageId?: string }, nowMs: number) => {
    const { id, imageId, slot } = claimTask({ ...input, nowMs });
    return { claimId: id, imageId, slot };
  },
  heartbeat: (input: By & { claimId: string }, nowMs: number) => heartbeat({ ...input, nowMs }),
  save: (input: By & { claimId: string; document: DeskDocument; version: number }, nowMs: number) =>
    saveDraft({ ...input, nowMs }),
  release: (input: By & { claimId: string }, nowMs: number) => releaseClaim({ ...input, nowMs }),
  submit: (input: By & { claimId: string; document: DeskDocument; activeSeconds: number }, nowMs: number) =>
    submitWork({ ...input, nowMs }),
  held: ({ actor }: By, nowMs: number) =>
    listLiveClaims(getDb(), actor.id, nowMs).map(({ id, batchId, imageId }) => ({
      claimId: id,
      batchId,
      imageId,
    })),

  contest: (input: By & { submissionId: string }, nowMs: number) =>
    contestScore({ ...input, reason: "My outlines are right, look again.", nowMs }),
  contestImage: (input: By & { imageId: string }, nowMs: number) =>
    contestImage({ ...input, reason: "Something on this picture is missing.", nowMs }),
  withdraw: (input: By & { disputeId: string }, nowMs: number) => withdrawDispute({ ...input, nowMs }),
  appeal: (input: By & { disputeId: string }, nowMs: number) =>
    appealDecision({ ...input, reason: "The decision overlooks my outlines.", nowMs }),
  /** Disputes that were decided on these submissions or pictures: what can be appealed. */
  decided({ subjects }: { subjects: string[] }) {
    if (subjects.length === 0) return [];
    const isDecided = and(eq(disputes.status, "decided"), inArray(disputes.subject, subjects));
    return getDb()
      .select({ id: disputes.id })
      .from(disputes)
      .where(isDecided)
      .orderBy(disputes.id)
      .all()
      .map(({ id }) => id);
  },
  /**
   * An admin takes one case of the docket: a proposal is confirmed or sent back, anything else is decided. `nth`
   * and `share` say which case, and how.
   */
  decide({ actor, nth, share }: By & { nth: number; share: number }, nowMs: number) {
    const open = listOpen();
    const dispute = open[nth % Math.max(1, open.length)];
    if (dispute) answerCase(dispute, actor, share, nowMs);
    return { left: listOpen().length };
  },
  /** The docket is emptied, each case by admins who had no part in it. */
  decideAll({ share }: { share: number }, nowMs: number) {
    for (let round = 0; round < 3; round += 1) {
      for (const { id } of listOpen()) {
        const dispute = findDispute(getDb(), id);
        if (dispute?.status !== "open") continue; // decided with another one about the same picture
        const admin = listImpartialAdmins(getDb(), dispute).find((row) => row.id !== dispute.proposedBy);
        if (!admin) throw new InvariantError(`nobody may decide ${id}`);
        const actor: Actor = { id: admin.id, role: "admin", name: admin.name, email: admin.email };
        answerCase(dispute, actor, (share + round * 0.31) % 0.9, nowMs);
      }
    }
    return { left: listOpen().length };
  },

  topUp: async (input: By & { teamId: string; amountCents: number }, nowMs: number) =>
    startTopUp({ ...input, returnPath: "/wallet", nowMs }),
  refund: (input: By & { teamId: string; amountCents: number }, nowMs: number) =>
    refundWallet({ ...input, nowMs }),
  onboard: (input: By, nowMs: number) => startOnboarding({ ...input, nowMs }),
  refresh: (input: By) => refreshOnboarding(input),
  account: ({ actor }: By) =>
    getDb().select({ id: users.stripeAccountId }).from(users).where(eq(users.id, actor.id)).get()?.id ?? null,
  payout: (input: By & { amountCents?: number }, nowMs: number) => requestPayout({ ...input, nowMs }),
  schedule: (input: By & { input: PayoutScheduleInput }, nowMs: number) =>
    setPayoutSchedule({ ...input, nowMs }),
  webhook: (input: { body: string; signature: string }, nowMs: number) =>
    receiveStripeEvent({ ...input, nowMs }),

  sweep: (_input: unknown, nowMs: number) =>
    enqueue(getDb(), { kind: "claims.sweep", payload: {}, uniqueKey: "claims.sweep", nowMs }),
  regular(_input: unknown, nowMs: number) {
    for (const kind of ["payouts.schedule", "consensus.overdue"] as const)
      enqueue(getDb(), { kind, payload: {}, uniqueKey: kind, nowMs });
  },
  nightly: (_input: unknown, nowMs: number) =>
    enqueue(getDb(), {
      kind: "ledger.reconcile",
      payload: {},
      uniqueKey: "ledger.reconcile",
      nowMs,
      priority: -10,
    }),
  reconcile: (_input: unknown, nowMs: number) => reconcile({ nowMs }),
  /** One job, as a worker of this name takes it. Says what is left to do and when it is due. */
  async job({ workerId }: { workerId: string }, startMs: number, clock: () => number) {
    const db = getDb();
    const job = takeJob(db, workerId, startMs);
    const error = job && (await runJob(db, job, HANDLERS, clock));
    if (error instanceof InvariantError || error instanceof TypeError) throw error;
    const isReason = error instanceof Stripe.errors.StripeError || error === undefined;
    return {
      kind: job?.kind ?? null,
      failure: isReason ? null : String(error),
      ...waiting(clock()),
    };
  },
  waiting: (_input: unknown, nowMs: number) => waiting(nowMs),
};

const listOpen = (): DisputeRow[] =>
  getDb()
    .select()
    .from(disputes)
    .where(eq(disputes.status, "open"))
    .orderBy(disputes.dueAtMs, disputes.id)
    .all();

function answerCase(dispute: DisputeRow, actor: Actor, share: number, nowMs: number): void {
  const reason = "Looked at in full and decided so.";
  const disputeId = dispute.id;
  if (dispute.proposal && dispute.proposedAtMs !== null) {
    const { proposedAtMs } = dispute;
    const verdict =
      share < 0.9 ? ({ verdict: "confirm" } as const) : ({ verdict: "send-back", reason } as const);
    confirmProposal({ actor, nowMs, disputeId, answer: { ...verdict, proposedAtMs } });
    return;
  }
  const list = listSubmissionsOf(getDb(), dispute.imageId);
  const picked = list[Math.floor(share * 1000) % list.length];
  const decision: DecideInput =
    !picked || share < 0.3
      ? { outcome: "keep", reason }
      : share < 0.6
        ? { outcome: "pick", submissionId: picked.id, reason }
        : share < 0.75
          ? { outcome: "redraw", document: picked.document, reason }
          : share < 0.85 && dispute.appealOf
            ? { outcome: "restore", reason }
            : { outcome: "broken", fault: share < 0.95 ? "brief" : "product", reason };
  decideDispute({ actor, nowMs, disputeId, decision });
}

function waiting(nowMs: number): { due: number; nextMs: number | null } {
  const queued = inArray(jobs.status, ["queued", "running"]);
  const [row] = getDb()
    .select({
      due: sql<number>`count(case when ${lte(jobs.runAtMs, nowMs)} and ${eq(jobs.status, "queued")} then 1 end)`,
      nextMs: sql<
        number | null
      >`min(case ${jobs.status} when 'running' then ${jobs.lockedUntilMs} + 1 else ${jobs.runAtMs} end)`,
    })
    .from(jobs)
    .where(and(queued))
    .all();
  return { due: row?.due ?? 0, nextMs: row?.nextMs ?? null };
}

export type Operations = typeof OPERATIONS;
export type Input<K extends keyof Operations> = Parameters<Operations[K]>[0];
export type Value<K extends keyof Operations> = Awaited<ReturnType<Operations[K]>>;
