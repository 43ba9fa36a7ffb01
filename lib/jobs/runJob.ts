import type { Db } from "@/db/client";
import { log } from "@/lib/log";
import type { Handler, JobContext } from "./handlers";
import type { JobKind } from "./kinds";
import { failJob, finishJob, reportProgress, type JobRow } from "./queue";
import { JobRefused } from "./refused";

export type Handlers = { [K in JobKind]?: Handler<K> };

/**
 * Does one job that was taken, and notes how it ended: done, put back for another attempt, or dead. Never
 * throws for what a handler throws; returns it instead.
 */
export async function runJob(
  db: Db,
  job: JobRow,
  handlers: Handlers,
  nowMs: () => number,
): Promise<unknown | undefined> {
  const context: JobContext = {
    jobId: job.id,
    nowMs,
    progress: (share, note) => void reportProgress(db, job, share, note ?? null, nowMs()),
  };
  try {
    const handler = handlers[job.kind as JobKind] as
      ((payload: unknown, context: JobContext) => Promise<void>) | undefined;
    if (!handler) throw new JobRefused(`no handler for ${job.kind}`);
    await handler(job.payload, context);
    finishJob(db, job, nowMs());
    return undefined;
  } catch (error) {
    log().warn({ err: error, job: job.id, kind: job.kind, attempt: job.attempts }, "job failed");
    failJob(db, job, error, nowMs(), !(error instanceof JobRefused));
    return error;
  }
}
