import { randomUUID } from "node:crypto";
import { setTimeout as sleep } from "node:timers/promises";
import { getDb } from "@/db/client";
import { nowMs } from "@/lib/clock";
import { HANDLERS } from "@/lib/jobs/handlers";
import { stopThreads } from "@/lib/jobs/pool";
import { enqueue, reportProgress, takeJob, type JobRow } from "@/lib/jobs/queue";
import { runJob } from "@/lib/jobs/runJob";
import { log } from "@/lib/log";
import { ensureBucket } from "@/lib/services/store";

/** Jobs under way at once in this process; the heavy part of each runs on threads. */
const LANES = 3;
const IDLE_MS = 150;
const SWEEP_EVERY_MS = 15_000;
const DUE_EVERY_MS = 60_000;

let stopping = false;
process.on("SIGTERM", () => (stopping = true));
process.on("SIGINT", () => (stopping = true));

async function run(job: JobRow): Promise<void> {
  const db = getDb();
  // A long handler that reports nothing still lives: its lease is extended while it runs.
  const pulse = setInterval(() => reportProgress(db, job, job.progress, job.progressNote, nowMs()), 20_000);
  await runJob(db, job, HANDLERS, nowMs).finally(() => clearInterval(pulse));
}

async function lane(workerId: string): Promise<void> {
  while (!stopping) {
    const job = takeJob(getDb(), workerId, nowMs());
    if (job) await run(job);
    else await sleep(IDLE_MS);
  }
}

async function sweepRegularly(): Promise<void> {
  let nextReconcileMs = nowMs() + 60_000;
  let nextDueMs = 0;
  while (!stopping) {
    enqueue(getDb(), { kind: "claims.sweep", payload: {}, uniqueKey: "claims.sweep", nowMs: nowMs() });
    if (nowMs() >= nextDueMs) {
      for (const kind of ["payouts.schedule", "consensus.overdue"] as const)
        enqueue(getDb(), { kind, payload: {}, uniqueKey: kind, nowMs: nowMs() });
      nextDueMs = nowMs() + DUE_EVERY_MS;
    }
    if (nowMs() >= nextReconcileMs) {
      enqueue(getDb(), {
        kind: "ledger.reconcile",
        payload: {},
        uniqueKey: "ledger.reconcile",
        nowMs: nowMs(),
        priority: -10,
      });
      nextReconcileMs = nowMs() + 24 * 3_600_000;
    }
    for (let waited = 0; waited < SWEEP_EVERY_MS && !stopping; waited += 500) await sleep(500);
  }
}

async function main(): Promise<void> {
  await ensureBucket();
  const workerId = randomUUID();
  log().info({ workerId }, "worker ready");
  await Promise.all([sweepRegularly(), ...Array.from({ length: LANES }, (_, n) => lane(`${workerId}:${n}`))]);
  await stopThreads();
  log().info("worker stopped");
}

main().then(
  () => process.exit(0),
  (error: unknown) => {
    log().fatal({ err: error }, "worker died");
    process.exit(1);
  },
);
