import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import { inTransaction, type Db } from "@/db/client";
import { jobs } from "@/db/schema";
import {
  backOffMs,
  enqueue,
  failJob,
  finishJob,
  jobCounts,
  listUnfinishedJobs,
  reportProgress,
  reviveJob,
  takeJob,
  type JobRow,
} from "@/lib/jobs/queue";
import { freshDb } from "@/tests/support/db";

const NOW_MS = 1_000_000;
const LEASE_MS = 60_000;

let db: Db;
beforeEach(() => {
  db = freshDb();
});

const put = (imageId: string, more: Partial<Parameters<typeof enqueue<"image.check">>[1]> = {}) =>
  enqueue(db, { kind: "image.check", payload: { imageId }, nowMs: NOW_MS, ...more });
const take = (worker = "w1", nowMs = NOW_MS) => takeJob(db, worker, nowMs);
const taken = (worker = "w1", nowMs = NOW_MS): JobRow => {
  const job = take(worker, nowMs);
  if (!job) throw new Error("no job is due");
  return job;
};
const stored = (id: string | null | undefined) =>
  db
    .select()
    .from(jobs)
    .where(eq(jobs.id, id ?? ""))
    .get();

describe("the queue", () => {
  it("gives the most urgent first, then the longest due", () => {
    put("late", { delayMs: 5 });
    put("early");
    put("urgent", { delayMs: 5, priority: 9 });
    const order = [1, 2, 3].map(() => taken("w1", NOW_MS + 10).payload);
    expect(order).toEqual([{ imageId: "urgent" }, { imageId: "early" }, { imageId: "late" }]);
    expect(take("w1", NOW_MS + 10)).toBeUndefined();
  });

  it("holds a delayed job back until it is due", () => {
    put("a", { delayMs: 100 });
    expect(take("w1", NOW_MS + 99)).toBeUndefined();
    expect(take("w1", NOW_MS + 100)).toBeDefined();
  });

  it("gives a job to one worker", () => {
    put("a");
    expect([take("w1"), take("w2")].map((job) => job?.lockedBy)).toEqual(["w1", undefined]);
  });

  it("holds one unfinished job for a key, and another once that is done", () => {
    expect(put("a", { uniqueKey: "k" })).not.toBeNull();
    expect(put("a", { uniqueKey: "k" })).toBeNull();
    const job = taken();
    expect(put("a", { uniqueKey: "k" })).toBeNull(); // running counts
    finishJob(db, job, NOW_MS);
    expect(put("a", { uniqueKey: "k" })).not.toBeNull();
  });

  it("keeps a job exactly when the transaction that caused it is kept", () => {
    expect(() =>
      inTransaction(db, (tx) => {
        enqueue(tx, { kind: "image.check", payload: { imageId: "a" }, nowMs: NOW_MS });
        throw new Error("the cause failed");
      }),
    ).toThrow();
    expect(take()).toBeUndefined();
  });

  it("tells what is unfinished about a subject, and counts by kind and state", () => {
    put("a", { subject: "bat_1" });
    put("b", { subject: "bat_2" });
    put("c", { subject: "bat_1" });
    finishJob(db, taken(), NOW_MS);
    expect(listUnfinishedJobs(db, "bat_1").length + listUnfinishedJobs(db, "bat_2").length).toBe(2);
    expect(jobCounts(db)).toEqual([
      { kind: "image.check", status: "done", count: 1 },
      { kind: "image.check", status: "queued", count: 2 },
    ]);
  });
});

describe("a worker that dies", () => {
  it("loses its job to another when the lease is over", () => {
    put("a");
    taken("w1");
    expect(take("w2", NOW_MS + LEASE_MS)).toBeUndefined();
    expect(taken("w2", NOW_MS + LEASE_MS + 1)).toMatchObject({ lockedBy: "w2", attempts: 2 });
  });

  it("keeps its job while it reports", () => {
    put("a");
    const job = taken("w1");
    expect(reportProgress(db, job, 0.5, "half", NOW_MS + 50_000)).toBe(true);
    expect(take("w2", NOW_MS + LEASE_MS + 1)).toBeUndefined();
    expect(stored(job.id)).toMatchObject({ progress: 0.5, progressNote: "half" });
  });

  it("and comes back late neither ends nor fails the job of its successor", () => {
    put("a");
    const lost = taken("w1");
    const current = taken("w2", NOW_MS + LEASE_MS + 1);
    expect(reportProgress(db, lost, 0.9, null, NOW_MS + LEASE_MS + 2)).toBe(false);
    failJob(db, lost, new Error("late"), NOW_MS + LEASE_MS + 2);
    expect(stored(current.id)).toMatchObject({ status: "running", lockedBy: "w2" });
    finishJob(db, lost, NOW_MS + LEASE_MS + 2);
    expect(stored(current.id)).toMatchObject({ status: "running", lockedBy: "w2" });
    finishJob(db, current, NOW_MS + LEASE_MS + 3);
    expect(stored(current.id)?.status).toBe("done");
  });

  it("over and over by the same job takes that job out of the queue", () => {
    put("poison", { attemptsMax: 2 });
    const first = taken("w1");
    taken("w2", NOW_MS + 2 * LEASE_MS);
    expect(take("w3", NOW_MS + 4 * LEASE_MS)).toBeUndefined();
    expect(stored(first.id)).toMatchObject({ status: "dead", attempts: 2 });
    expect(stored(first.id)?.lastError).toMatch(/worker/);
  });
});

describe("a job that fails", () => {
  it("is tried again after a growing wait, and is dead after its last attempt", () => {
    const id = put("a", { attemptsMax: 3 }) ?? "";
    let nowMs = NOW_MS;
    for (const attempt of [1, 2]) {
      failJob(db, taken("w1", nowMs), new Error(`attempt ${attempt}`), nowMs);
      const waitMs = backOffMs(id, attempt);
      expect(take("w1", nowMs + waitMs - 1)).toBeUndefined();
      nowMs += waitMs;
    }
    failJob(db, taken("w1", nowMs), new Error("for good"), nowMs);
    expect(stored(id)).toMatchObject({ status: "dead", attempts: 3, lastError: "for good" });
    expect(take("w1", nowMs + 1e9)).toBeUndefined();
  });

  it("for good is dead at once", () => {
    const id = put("a");
    failJob(db, taken(), "it can never succeed", NOW_MS, false);
    expect(stored(id)).toMatchObject({ status: "dead", lastError: "it can never succeed" });
  });

  it("can be given another set of attempts, once", () => {
    const id = put("a", { attemptsMax: 1 }) ?? "";
    failJob(db, taken(), new Error("no"), NOW_MS);
    expect(reviveJob(db, id, NOW_MS + 5)).toBe(true);
    expect(reviveJob(db, id, NOW_MS + 5)).toBe(false);
    expect(taken("w1", NOW_MS + 5)).toMatchObject({ id, attempts: 1 });
  });

  it("is not revived beside a living job of the same key", () => {
    const id = put("a", { uniqueKey: "k", attemptsMax: 1 }) ?? "";
    failJob(db, taken(), new Error("no"), NOW_MS);
    put("a", { uniqueKey: "k" });
    expect(reviveJob(db, id, NOW_MS)).toBe(false);
    expect(stored(id)?.status).toBe("dead");
  });

  it("waits 1 s, 2 s, 4 s ... up to 5 min, with at most a quarter more", () => {
    for (let attempt = 1; attempt <= 20; attempt++) {
      const base = Math.min(1000 * 2 ** (attempt - 1), 300_000);
      const wait = backOffMs("job_a", attempt);
      expect(wait).toBeGreaterThanOrEqual(base);
      expect(wait).toBeLessThanOrEqual(base * 1.25);
      expect(wait).toBe(backOffMs("job_a", attempt));
    }
  });
});
