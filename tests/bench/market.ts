import { existsSync } from "node:fs";
import path from "node:path";
import Database from "better-sqlite3";
import { sql } from "drizzle-orm";
import { encode } from "next-auth/jwt";
import { migrateDatabase, openDatabase, setDb, type Db } from "@/db/client";
import type { Actor } from "@/lib/auth/actor";
import { stackEnv } from "@/lib/cli/stack";
import { newId } from "@/lib/ids";
import { enqueue, finishJob, takeJob } from "@/lib/jobs/queue";
import { LEASE_MS } from "@/lib/market/work/claimTask";
import { documentHash } from "@/lib/market/work/submitWork";
import { classId, draftBatch, drawing, imagesOf, person, publish, team } from "@/tests/support/market";
import { startStack } from "@/tests/support/stack";

/**
 * `npm run bench:market [-- --people N] [-- --rounds N]`: what the market does in a second.
 *
 * Claims and submissions go over loopback HTTP through the production build (`npm run build` first), by so many
 * annotators at once on one batch, each with a session; the worker is not running. Jobs go through the queue in
 * this process. Beside each stands what better-sqlite3 alone makes of the same rows, one commit each, prepared
 * statements, the same settings (WAL, synchronous FULL) and indexes, on the same disk, in the same run. Exits 1
 * when a slot or a person was booked twice, or anything that was acknowledged is not there.
 */
const option = (name: string, fallback: number) => {
  const index = process.argv.indexOf(`--${name}`);
  return index >= 0 ? Number(process.argv[index + 1]) : fallback;
};
const PEOPLE = option("people", 200);
const ROUNDS = option("rounds", 5);
const JOBS = 2000;

type Timed = { count: number; seconds: number; latenciesMs: number[] };
type Answered = { actor: Actor; claimId: string };

const at = (values: readonly number[], share: number) => {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))] ?? NaN;
};

/** All at once; the time until the last has its answer. */
async function burst<T, R>(list: readonly T[], timed: Timed, ask: (entry: T) => Promise<R>): Promise<R[]> {
  const startMs = performance.now();
  const answers = await Promise.all(
    list.map(async (entry) => {
      const beganMs = performance.now();
      const answer = await ask(entry);
      timed.latenciesMs.push(performance.now() - beganMs);
      return answer;
    }),
  );
  timed.seconds += (performance.now() - startMs) / 1000;
  timed.count += list.length;
  return answers;
}

/** Runs `write` once for each index, and gives how many a second. */
function perSecond(count: number, write: (index: number) => void): number {
  const startMs = performance.now();
  for (let index = 0; index < count; index += 1) write(index);
  return count / ((performance.now() - startMs) / 1000);
}

function print(what: string, rate: number, bareRate: number, latenciesMs?: readonly number[]): void {
  const times = latenciesMs
    ? `p50 ${at(latenciesMs, 0.5).toFixed(0)} ms, p99 ${at(latenciesMs, 0.99).toFixed(0)} ms`
    : "";
  console.log(
    `${what.padEnd(26)}${rate.toFixed(0).padStart(8)}/s   bare better-sqlite3 ${bareRate.toFixed(0).padStart(6)}/s   ${times}`,
  );
}

async function main(): Promise<number> {
  if (!existsSync(path.resolve(".next/BUILD_ID")))
    throw new Error("There is no production build: npm run build.");
  const stack = await startStack({ worker: false });
  try {
    const db = openDatabase(stack.databaseFile);
    setDb(db);
    const nowMs = Date.now();
    const owner = person(db, "requester");
    const imageCount = Math.ceil((PEOPLE * ROUNDS) / 3) + PEOPLE;
    const batchId = draftBatch(db, owner, team(db, owner, 100_000_000), {
      imageCount,
      kMin: 3,
      kMax: 3,
      nowMs,
    });
    publish(db, owner, batchId, nowMs);
    const bottle = classId(db, batchId, "bottle");
    const people = Array.from({ length: PEOPLE }, () => person(db, "annotator"));
    const secret = stackEnv(stack.plan).AUTH_SECRET ?? "local-demo-secret-do-not-use-elsewhere";
    const cookies = new Map<string, string>();
    for (const { id } of people)
      cookies.set(id, `next-auth.session-token=${await encode({ token: { sub: id, epoch: 0 }, secret })}`);
    const call = async (actor: Actor, target: string, body: unknown): Promise<Record<string, string>> => {
      const headers = { "content-type": "application/json", cookie: cookies.get(actor.id) ?? "" };
      const answer = await fetch(stack.url + target, { method: "POST", headers, body: JSON.stringify(body) });
      const text = await answer.text();
      if (answer.status !== 201)
        throw new Error(`${target} answered ${answer.status}: ${text.slice(0, 200)}`);
      return JSON.parse(text) as Record<string, string>;
    };
    const claim = async (actor: Actor): Promise<Answered> => ({
      actor,
      claimId: (await call(actor, "/api/claims", { batchId })).claimId ?? "",
    });
    const document = drawing(
      bottle,
      Array.from({ length: 8 }, (_, index) => [20 + 70 * index, 40 + 5 * index, 60, 90] as const),
    );
    const submit = async ({ actor, claimId }: Answered) =>
      (await call(actor, `/api/claims/${claimId}/submission`, { document, activeSeconds: 60 }))
        .submissionId ?? "";

    const warmUp: Timed = { count: 0, seconds: 0, latenciesMs: [] };
    const first = await burst(people.slice(0, 20), warmUp, claim);
    await burst(first, warmUp, submit);
    const claims: Timed = { count: 0, seconds: 0, latenciesMs: [] };
    const submissions: Timed = { count: 0, seconds: 0, latenciesMs: [] };
    const acknowledged: string[] = [];
    for (let round = 0; round < ROUNDS; round += 1)
      acknowledged.push(...(await burst(await burst(people, claims, claim), submissions, submit)));

    const doubles = db.all<{ id: string }>(
      sql`select image_id as id from claims where status in ('live', 'submitted') group by image_id, slot having count(*) > 1
        union all select image_id from claims where status in ('live', 'submitted') group by image_id, annotator_id having count(*) > 1`,
    ).length;
    const kept = new Set(db.all<{ id: string }>(sql`select id from submissions`).map(({ id }) => id));
    const lost = acknowledged.filter((id) => !kept.has(id)).length;
    const jobs = jobsPerSecond(db);
    const bare = bareFigures(stack.databaseFile + ".bare", db, {
      batchId,
      people,
      document: JSON.stringify(document),
      hash: documentHash(document),
    });
    console.log(`${PEOPLE} annotators at once, ${ROUNDS} rounds, ${imageCount} images, 8 boxes a drawing`);
    print("claims over HTTP", claims.count / claims.seconds, bare.claims, claims.latenciesMs);
    print(
      "submissions over HTTP",
      submissions.count / submissions.seconds,
      bare.submissions,
      submissions.latenciesMs,
    );
    print("jobs through the queue", jobs, bare.jobs);
    console.log(`booked twice: ${doubles}; acknowledged and lost: ${lost}`);
    db.$client.close();
    return doubles + lost > 0 ? 1 : 0;
  } finally {
    await stack.stop();
  }
}

/** Each job is put in by a commit of its own, taken and finished. */
function jobsPerSecond(db: Db): number {
  const nowMs = Date.now();
  // What the submissions queued is put aside: only the queue is measured.
  db.run(sql`update jobs set status = 'cancelled' where status = 'queued'`);
  return perSecond(JOBS, () => {
    enqueue(db, { kind: "claims.sweep", payload: {}, nowMs });
    const job = takeJob(db, "bench", nowMs);
    if (job) finishJob(db, job, nowMs);
  });
}

type Rows = { batchId: string; people: Actor[]; document: string; hash: string };

/** The same rows by better-sqlite3 alone: prepared once, a commit for each claim, submission and change of a job. */
function bareFigures(file: string, source: Db, { batchId, people, document, hash }: Rows) {
  const prepared = openDatabase(file);
  migrateDatabase(prepared);
  prepared.$client.close();
  const db = new Database(file);
  for (const setting of ["journal_mode = WAL", "synchronous = FULL", "foreign_keys = OFF"])
    db.pragma(setting);
  const images = imagesOf(source, batchId).map(({ id }) => id);
  const nowMs = Date.now();
  const count = Math.min(PEOPLE * ROUNDS, images.length * 3);
  const ids = Array.from({ length: count }, () => newId("clm"));
  const insertClaim = db.prepare(
    "insert into claims (id, batch_id, image_id, annotator_id, slot, status, brief_version, claimed_at_ms, heartbeat_at_ms, expires_at_ms) values (?, ?, ?, ?, ?, 'live', 1, ?, ?, ?)",
  );
  const claims = perSecond(count, (index) =>
    insertClaim.run(
      ids[index],
      batchId,
      images[Math.floor(index / 3)],
      people[index % people.length]?.id,
      (index % 3) + 1,
      nowMs,
      nowMs,
      nowMs + LEASE_MS,
    ),
  );
  const insertSubmission = db.prepare(
    "insert into submissions (id, claim_id, batch_id, image_id, annotator_id, document, sha256, active_seconds, submitted_at_ms) values (?, ?, ?, ?, ?, ?, ?, 60, ?)",
  );
  const endClaim = db.prepare("update claims set status = 'submitted', ended_at_ms = ? where id = ?");
  const dropDraft = db.prepare("delete from drafts where claim_id = ?");
  const insertJob = db.prepare(
    "insert into jobs (id, kind, payload, status, priority, run_at_ms, created_at_ms) values (?, ?, '{}', 'queued', 4, ?, ?)",
  );
  const submit = db.transaction((index: number) => {
    const id = ids[index];
    insertSubmission.run(
      newId("sub"),
      id,
      batchId,
      images[Math.floor(index / 3)],
      people[index % people.length]?.id,
      document,
      hash,
      nowMs,
    );
    endClaim.run(nowMs, id);
    dropDraft.run(id);
    if (index % 3 === 2) insertJob.run(newId("job"), "consensus.settle", nowMs, nowMs);
  });
  const submissions = perSecond(count, (index) => submit.immediate(index));
  const start = db.prepare(
    "update jobs set status = 'running', attempts = attempts + 1, locked_by = 'bench', locked_until_ms = ? where id = ?",
  );
  const finish = db.prepare(
    "update jobs set status = 'done', progress = 1, finished_at_ms = ?, locked_by = null, locked_until_ms = null where id = ?",
  );
  const jobs = perSecond(JOBS, () => {
    const id = newId("job");
    insertJob.run(id, "claims.sweep", nowMs, nowMs);
    start.run(nowMs, id);
    finish.run(nowMs, id);
  });
  db.close();
  return { claims, submissions, jobs };
}

main().then(
  (code) => (process.exitCode = code),
  (error: unknown) => {
    console.error(error instanceof Error ? error.message : error);
    process.exit(1);
  },
);
