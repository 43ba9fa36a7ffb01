import { and, eq, inArray, sql } from "drizzle-orm";
import { describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { ledgerViolations } from "@/db/queries/ledger";
import { batches, claims, disputes, images, jobs, ledgerEntries, submissions } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { findAuditBreak } from "@/lib/market/audit";
import { closeBatch } from "@/lib/market/batches/closeBatch";
import { setPaused } from "@/lib/market/batches/publishBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { decideDispute } from "@/lib/market/disputes/decideDispute";
import { contestImage, contestScore } from "@/lib/market/disputes/openDispute";
import { claimTask } from "@/lib/market/work/claimTask";
import { heartbeat, releaseClaim, saveDraft } from "@/lib/market/work/keepClaim";
import { documentHash, submitWork } from "@/lib/market/work/submitWork";
import type { Box } from "@/lib/geometry/types";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  classId,
  credit,
  draftBatch,
  drawing,
  MINUTE_MS,
  person,
  publish,
  START_MS,
  strayBottles,
  team,
} from "@/tests/support/market";

/** Mulberry32 (T. Ettinger, 2017, public domain): one seed, one history. */
function randomOf(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let mixed = Math.imul(state ^ (state >>> 15), state | 1);
    mixed ^= mixed + Math.imul(mixed ^ (mixed >>> 7), mixed | 61);
    return ((mixed ^ (mixed >>> 14)) >>> 0) / 4_294_967_296;
  };
}

type World = {
  db: Db;
  random: () => number;
  nowMs: number;
  owner: Actor;
  teamId: string;
  admins: Actor[];
  annotators: Actor[];
  /** Hashes of what was acknowledged as handed in. */
  acknowledged: Map<string, string>;
  fundedCents: number;
};

function worldOf(seed: number): World {
  const db = freshDb();
  const owner = person(db, "requester");
  return {
    db,
    random: randomOf(seed),
    nowMs: START_MS,
    owner,
    teamId: team(db, owner, 3000),
    admins: [person(db, "admin"), person(db, "admin")],
    annotators: Array.from({ length: 7 }, () => person(db, "annotator")),
    acknowledged: new Map(),
    fundedCents: 3000,
  };
}

const pickOf = <T>({ random }: World, list: readonly T[]): T | undefined =>
  list[Math.floor(random() * list.length)];
const batchesOf = ({ db }: World, ...status: ("open" | "paused" | "closed")[]) =>
  db
    .select()
    .from(batches)
    .where(inArray(batches.status, status))
    .orderBy(sql`rowid`)
    .all();

/** The objects as one annotator draws them: most carefully, some carelessly, the last at random. */
function drawnBy(world: World, who: number): Box[] {
  if (who === 6) return strayBottles(Math.floor(world.random() * 5));
  const boxes = bottles(Math.floor(world.random() * 5) - 2);
  return who >= 4 && world.random() < 0.6 ? boxes.slice(0, 2) : boxes;
}

type Step = (world: World) => void;

const STEPS: [weight: number, name: string, step: Step][] = [
  [
    2,
    "post a batch",
    (w) => {
      const options = {
        imageCount: 1 + Math.floor(w.random() * 3),
        kMin: 1 + Math.floor(w.random() * 3),
        nowMs: w.nowMs,
      };
      const kMax = options.kMin + Math.floor(w.random() * 2);
      const batchId = draftBatch(w.db, w.owner, w.teamId, { ...options, kMax });
      publish(w.db, w.owner, batchId, w.nowMs);
    },
  ],
  [
    1,
    "top up",
    (w) => {
      const cents = 1 + Math.floor(w.random() * 2000);
      credit(w.db, w.teamId, cents);
      w.fundedCents += cents;
    },
  ],
  [
    10,
    "claim",
    (w) => {
      const batch = pickOf(w, batchesOf(w, "open"));
      const actor = pickOf(w, w.annotators);
      if (batch && actor) claimTask({ actor, nowMs: w.nowMs, batchId: batch.id });
    },
  ],
  [
    12,
    "hand in",
    (w) => {
      // Expired and handed-in claims too: a late tab tries again.
      const claim = pickOf(
        w,
        w.db
          .select()
          .from(claims)
          .orderBy(sql`rowid desc`)
          .limit(12)
          .all(),
      );
      const who = w.annotators.findIndex((actor) => actor.id === claim?.annotatorId);
      const actor = w.annotators[who];
      if (!claim || !actor) return;
      const document = drawing(classId(w.db, claim.batchId, "bottle"), drawnBy(w, who));
      const handedIn = {
        actor,
        nowMs: w.nowMs,
        claimId: claim.id,
        document,
        activeSeconds: w.random() * 200,
      };
      const { submissionId } = submitWork(handedIn);
      expect(submitWork(handedIn).submissionId).toBe(submissionId);
      w.acknowledged.set(submissionId, documentHash(document));
    },
  ],
  [
    3,
    "keep or give back",
    (w) => {
      const claim = pickOf(
        w,
        w.db
          .select()
          .from(claims)
          .where(eq(claims.status, "live"))
          .orderBy(sql`rowid`)
          .all(),
      );
      const actor = w.annotators.find((one) => one.id === claim?.annotatorId);
      if (!claim || !actor) return;
      const by = { actor, nowMs: w.nowMs, claimId: claim.id };
      const dice = w.random();
      if (dice < 0.3) releaseClaim(by);
      else if (dice < 0.6) heartbeat(by);
      else saveDraft({ ...by, document: drawing("", []), version: 0 });
    },
  ],
  [
    12,
    "settle",
    (w) => {
      // Jobs come in any order, twice, and for images that are settled already.
      const image = pickOf(
        w,
        w.db
          .select()
          .from(images)
          .orderBy(sql`rowid desc`)
          .limit(8)
          .all(),
      );
      if (image) settleImage({ imageId: image.id, nowMs: w.nowMs });
    },
  ],
  [
    4,
    "contest a score",
    (w) => {
      const submission = pickOf(
        w,
        w.db
          .select()
          .from(submissions)
          .orderBy(sql`rowid desc`)
          .limit(10)
          .all(),
      );
      const actor = w.annotators.find((one) => one.id === submission?.annotatorId);
      if (submission && actor)
        contestScore({ actor, nowMs: w.nowMs, submissionId: submission.id, reason: "I drew what is there." });
    },
  ],
  [
    2,
    "contest an image",
    (w) => {
      const image = pickOf(
        w,
        w.db
          .select()
          .from(images)
          .orderBy(sql`rowid desc`)
          .limit(10)
          .all(),
      );
      if (image)
        contestImage({ actor: w.owner, nowMs: w.nowMs, imageId: image.id, reason: "A bottle is missing." });
    },
  ],
  [
    6,
    "decide",
    (w) => {
      const dispute = pickOf(
        w,
        w.db
          .select()
          .from(disputes)
          .where(eq(disputes.status, "open"))
          .orderBy(sql`rowid`)
          .all(),
      );
      const actor = pickOf(w, w.admins);
      if (!dispute || !actor) return;
      const reason = "The picture shows it clearly.";
      const submission = pickOf(
        w,
        w.db
          .select()
          .from(submissions)
          .where(eq(submissions.imageId, dispute.imageId))
          .orderBy(sql`rowid`)
          .all(),
      );
      const document = drawing(
        classId(w.db, dispute.batchId, "bottle"),
        bottles().slice(0, 1 + Math.floor(w.random() * 3)),
      );
      const decision = pickOf(w, [
        { outcome: "keep" as const, reason },
        { outcome: "pick" as const, submissionId: submission?.id ?? "", reason },
        { outcome: "redraw" as const, document, reason },
      ]);
      if (decision) decideDispute({ actor, nowMs: w.nowMs, disputeId: dispute.id, decision });
    },
  ],
  [
    1,
    "pause or go on",
    (w) => {
      const batch = pickOf(w, batchesOf(w, "open", "paused"));
      if (batch)
        setPaused({ actor: w.owner, nowMs: w.nowMs, batchId: batch.id, paused: batch.status === "open" });
    },
  ],
  [
    1,
    "close",
    (w) => {
      const batch = pickOf(w, batchesOf(w, "open", "paused"));
      if (batch) closeBatch({ actor: w.owner, nowMs: w.nowMs, batchId: batch.id });
    },
  ],
];

const WEIGHT = STEPS.reduce((sum, [weight]) => sum + weight, 0);

function stepOf(world: World): (typeof STEPS)[number] {
  let left = world.random() * WEIGHT;
  for (const step of STEPS) {
    left -= step[0];
    if (left < 0) return step;
  }
  throw new Error("the weights do not sum");
}

/** What must hold after every step, beside the ledger's own laws. */
function brokenIn({ db, acknowledged, fundedCents }: World): string[] {
  const broken = [...ledgerViolations(db)];
  const cents = (where: string) =>
    db.get<{ cents: number }>(
      sql.raw(`select coalesce(sum(balance_cents), 0) as cents from ledger_accounts where ${where}`),
    ).cents;
  if (-cents("kind = 'stripe'") !== fundedCents) broken.push("what came in is not what Stripe keeps");
  const open = cents("kind = 'escrow' and owner_id in (select id from batches where status = 'closed')");
  if (open !== 0) broken.push(`closed batches hold ${open} cents`);
  // Each submission was paid exactly what it says, by its release and its corrections.
  const paid = db.all<{ id: string; says: number; moved: number }>(sql`
    select s.id, coalesce(s.pay_cents, 0) as says, coalesce((
      select sum(e.cents) from ${ledgerEntries} e join ledger_postings p on p.id = e.posting_id
      where p.source = 'submission' and p.source_id = s.id
        and (e.account_id = 'payable:' || s.annotator_id or e.account_id = 'debt:' || s.annotator_id)), 0) as moved
    from submissions s where coalesce(s.pay_cents, 0) <> moved`);
  for (const row of paid) broken.push(`submission ${row.id} says ${row.says} and got ${row.moved}`);
  for (const [id, sha256] of acknowledged) {
    const row = db.select().from(submissions).where(eq(submissions.id, id)).get();
    if (!row || row.sha256 !== sha256 || documentHash(row.document) !== sha256)
      broken.push(`submission ${id} is not as handed in`);
  }
  const crowded = db.all<{ id: string }>(sql`
    select i.id from images i where (select count(*) from claims c where c.image_id = i.id and c.status in ('live', 'submitted')) > max(i.slots_wanted, 0)`);
  for (const { id } of crowded) broken.push(`image ${id} has more people than places`);
  const stuck = db.all<{ id: string }>(sql`
    select i.id from images i join batches b on b.id = i.batch_id
    where b.status in ('open', 'paused') and i.consensus_state in ('none', 'short') and i.slots_wanted > 0
      and (select count(*) from submissions s where s.image_id = i.id) >= i.slots_wanted
      and not exists (select 1 from jobs j where j.kind = 'consensus.settle' and j.status = 'queued'
        and j.payload = json_object('imageId', i.id))`);
  for (const { id } of stuck) broken.push(`image ${id} has its submissions and no job`);
  const split = db.all<{ id: string }>(sql`
    select i.id from images i where i.consensus_state = 'split'
      and not exists (select 1 from disputes d where d.image_id = i.id and d.status = 'open')`);
  for (const { id } of split) broken.push(`image ${id} is split and on no docket`);
  return broken;
}

describe("a random history of the market", () => {
  it.each([1, 2, 3])("with seed %d keeps every law after each of its steps", (seed) => {
    const world = worldOf(seed);
    const done = new Map<string, number>();
    for (let n = 0; n < 250; n++) {
      world.nowMs += Math.floor(world.random() * 6 * MINUTE_MS);
      const [, name, step] = stepOf(world);
      try {
        step(world);
        done.set(name, (done.get(name) ?? 0) + 1);
      } catch (error) {
        if (!(error instanceof AppError)) throw new Error(`step ${n}, ${name}`, { cause: error });
      }
      expect(brokenIn(world), `after step ${n}, ${name}`).toEqual([]);
    }
    expect(findAuditBreak(world.db)).toBeNull();
    expect([...done.keys()].length).toBeGreaterThanOrEqual(8); // the history went through most of the market
    const dead = world.db
      .select()
      .from(jobs)
      .where(and(eq(jobs.status, "dead")))
      .all();
    expect(dead).toEqual([]);
  });
});
