import type { JobKind, JobPayloads } from "../kinds";
import { checkImageJob } from "./checkImage";
import { proposeImageJob } from "./proposeImage";
import { reconcileJob } from "./reconcile";
import { releaseBuildJob } from "./releaseBuild";
import { refundRunJob } from "./refundRun";
import { sendMailJob } from "./sendMail";
import { settleImageJob } from "./settleImage";
import { stripeEventJob } from "./stripeEvent";
import { sweepClaimsJob } from "./sweepClaims";
import { trainBatchJob } from "./trainBatch";
import { payoutRunJob } from "./payoutRun";
import { payoutsScheduleJob } from "./payoutsSchedule";
import { settleOverdueJob } from "./settleOverdue";

export type JobContext = {
  /** The same over all attempts of the job. */
  jobId: string;
  nowMs: () => number;
  /** Says how far the job is, 0..1, and extends its lease. */
  progress: (share: number, note?: string) => void;
};

/**
 * What does each kind of job. Every handler is idempotent: it may run again after a crash at any point. It
 * throws to be tried again later; `JobRefused` ends the job at once.
 */
export type Handler<K extends JobKind> = (payload: JobPayloads[K], context: JobContext) => Promise<void>;

export const HANDLERS: { [K in JobKind]: Handler<K> } = {
  "mail.send": sendMailJob,
  "image.check": checkImageJob,
  "image.propose": proposeImageJob,
  "consensus.settle": settleImageJob,
  "batch.train": trainBatchJob,
  "release.build": releaseBuildJob,
  "claims.sweep": sweepClaimsJob,
  "payouts.schedule": payoutsScheduleJob,
  "consensus.overdue": settleOverdueJob,
  "payout.run": payoutRunJob,
  "refund.run": refundRunJob,
  "stripe.event": stripeEventJob,
  "ledger.reconcile": reconcileJob,
};
