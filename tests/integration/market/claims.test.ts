import { execFile } from "node:child_process";
import { mkdtempSync, rmSync } from "node:fs";
import os from "node:os";
import path from "node:path";
import { promisify } from "node:util";
import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import { migrateDatabase, openDatabase, setDb, type Db } from "@/db/client";
import { claims, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { newId } from "@/lib/ids";
import { setPaused } from "@/lib/market/batches/publishBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { claimTask, LEASE_MS } from "@/lib/market/work/claimTask";
import { deskTask } from "@/lib/market/work/deskTask";
import { expireClaims } from "@/lib/market/work/expireClaims";
import { heartbeat, releaseClaim, saveDraft } from "@/lib/market/work/keepClaim";
import { submitWork } from "@/lib/market/work/submitWork";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  classId,
  drawing,
  draftBatch,
  MINUTE_MS,
  openMarket,
  person,
  publish,
  refusalOf,
  refusalText,
  START_MS,
  strayBottles,
  work,
  type Market,
} from "@/tests/support/market";

const run = promisify(execFile);

let db: Db;
let market: Market;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 2, kMin: 2, kMax: 3 });
});

const someone = (index: number) => {
  const found = market.annotators[index];
  if (!found) throw new Error("the market has five annotators");
  return found;
};
const claim = (
  index: number,
  more: { imageId?: string | undefined; nowMs?: number; batchId?: string } = {},
) => claimTask({ actor: someone(index), nowMs: START_MS, batchId: market.batchId, ...more });
const claimOf = (claimId: string) => db.select().from(claims).where(eq(claims.id, claimId)).get();
const drawn = () => drawing(classId(db, market.batchId, "bottle"), bottles());

describe("a claim", () => {
  it("holds a slot for a while", () => {
    const held = claim(0);
    expect(held).toMatchObject({
      status: "live",
      slot: 1,
      expiresAtMs: START_MS + LEASE_MS,
      briefVersion: 1,
    });
  });

  it("asked for twice is the same claim", () => {
    expect(claim(0).id).toBe(claim(0).id);
  });

  it("fills one image before the next is begun", () => {
    const [first, second] = market.imageIds;
    expect([claim(0), claim(1), claim(2)].map((held) => held.imageId)).toEqual([first, first, second]);
  });

  it("of an image whose slots are all held is refused, and changes nothing", () => {
    const [imageId] = market.imageIds;
    claim(0, { imageId });
    claim(1, { imageId });
    expect(refusalText(() => claim(2, { imageId }))).toMatch(/Somebody else has this image/);
    expect(db.select().from(claims).all()).toHaveLength(2);
  });

  it("of a slot that is held is refused by the database itself", () => {
    const held = claim(0);
    const twin = { ...held, id: newId("clm"), annotatorId: someone(1).id };
    expect(() => db.insert(claims).values(twin).run()).toThrow(/UNIQUE/);
    const mine = { ...held, id: newId("clm"), slot: 2 };
    expect(() => db.insert(claims).values(mine).run()).toThrow(/UNIQUE/);
  });

  it("never gives an annotator a second slot of an image", () => {
    const [imageId] = market.imageIds;
    work(market, someone(0), bottles(), { imageId });
    expect(refusalOf(() => claim(0, { imageId }))).toBe("conflict");
  });

  it("is refused when nothing waits, and says so", () => {
    for (const imageId of market.imageIds) {
      claim(0, { imageId });
      claim(1, { imageId });
    }
    expect(refusalText(() => claim(2))).toMatch(/No image of this batch waits/);
  });

  it("beyond two at a time is refused until one is handed in or given back", () => {
    const other = draftBatch(db, market.owner, market.teamId, { imageCount: 1 });
    publish(db, market.owner, other);
    const third = draftBatch(db, market.owner, market.teamId, { imageCount: 1 });
    publish(db, market.owner, third);
    const first = claim(0);
    claim(0, { batchId: other });
    expect(refusalText(() => claim(0, { batchId: third }))).toMatch(/hold 2 images/);
    releaseClaim({ actor: someone(0), nowMs: START_MS, claimId: first.id });
    expect(claim(0, { batchId: third }).batchId).toBe(third);
  });

  it("on a sensitive batch takes an opt-in", () => {
    const sensitive = draftBatch(db, market.owner, market.teamId, { sensitive: true });
    publish(db, market.owner, sensitive);
    expect(refusalOf(() => claim(0, { batchId: sensitive }))).toBe("forbidden");
    db.update(users)
      .set({ acceptsSensitive: true })
      .where(eq(users.id, someone(0).id))
      .run();
    expect(claim(0, { batchId: sensitive }).status).toBe("live");
  });

  it("on a draft or an unknown batch finds nothing, on a paused one is a conflict", () => {
    const draft = draftBatch(db, market.owner, market.teamId);
    expect(refusalOf(() => claim(0, { batchId: draft }))).toBe("not_found");
    expect(refusalOf(() => claim(0, { batchId: "bat_none" }))).toBe("not_found");
    setPaused({ actor: market.owner, nowMs: START_MS, batchId: market.batchId, paused: true });
    expect(refusalText(() => claim(0))).toMatch(/no new work at the moment/);
  });

  it("that was given back frees the slot for others at once, and comes last for who gave it back", () => {
    const [first, second] = market.imageIds;
    const held = claim(0);
    releaseClaim({ actor: someone(0), nowMs: START_MS, claimId: held.id });
    releaseClaim({ actor: someone(0), nowMs: START_MS, claimId: held.id }); // said twice
    expect(claim(1).imageId).toBe(first);
    expect(claim(0).imageId).toBe(second);
    expect(refusalOf(() => heartbeat({ actor: someone(0), nowMs: START_MS, claimId: held.id }))).toBe("gone");
    expect(refusalOf(() => deskTask({ actor: someone(0), claimId: held.id }))).toBe("gone");
  });

  it("of somebody else is not found, whatever is tried with it", () => {
    const held = claim(0);
    const by = { actor: someone(1), nowMs: START_MS, claimId: held.id };
    expect(refusalOf(() => heartbeat(by))).toBe("not_found");
    expect(refusalOf(() => releaseClaim(by))).toBe("not_found");
    expect(refusalOf(() => saveDraft({ ...by, document: drawn(), version: 0 }))).toBe("not_found");
    expect(refusalOf(() => submitWork({ ...by, document: drawn(), activeSeconds: 9 }))).toBe("not_found");
    expect(refusalOf(() => deskTask({ actor: someone(1), claimId: held.id }))).toBe("not_found");
    expect(claimOf(held.id)?.status).toBe("live");
  });
});

describe("a lease", () => {
  const LATER_MS = START_MS + LEASE_MS + 1;

  it("starts anew with each sign of life", () => {
    const held = claim(0);
    heartbeat({ actor: someone(0), nowMs: START_MS + 15 * MINUTE_MS, claimId: held.id });
    expect(claim(1, { nowMs: LATER_MS }).slot).toBe(2);
    expect(claimOf(held.id)?.status).toBe("live");
  });

  it("that ran out gives the image to the next person", () => {
    const [imageId] = market.imageIds;
    const lost = claim(0, { imageId });
    const kept = claim(1, { imageId, nowMs: START_MS + 10 * MINUTE_MS });
    expect(claim(2, { imageId, nowMs: LATER_MS }).slot).toBe(1);
    expect([claimOf(lost.id)?.status, claimOf(kept.id)?.status]).toEqual(["expired", "live"]);
  });

  it("that ran out while somebody else took the place ends with a clear answer, and nothing is handed in", () => {
    const [imageId] = market.imageIds;
    const lost = claim(0, { imageId });
    claim(1, { imageId, nowMs: LATER_MS });
    claim(2, { imageId, nowMs: LATER_MS });
    const late = { actor: someone(0), nowMs: LATER_MS + 1, claimId: lost.id };
    const attempt = () => submitWork({ ...late, document: drawn(), activeSeconds: 60 });
    expect(refusalOf(attempt)).toBe("gone");
    expect(refusalText(attempt)).toMatch(/ran out and somebody else has the place/);
    expect(refusalOf(() => heartbeat(late))).toBe("gone");
    expect(claimOf(lost.id)?.status).toBe("expired");
  });

  it("that ran out goes on while the place is free: the work of an hour without network is not lost", () => {
    const held = claim(0);
    expireClaims(db, LATER_MS);
    expect(claimOf(held.id)?.status).toBe("expired");
    const late = { actor: someone(0), nowMs: LATER_MS, claimId: held.id };
    expect(heartbeat(late).expiresAtMs).toBe(LATER_MS + LEASE_MS);
    expect(claimOf(held.id)).toMatchObject({ status: "live", endedAtMs: null });
    expect(submitWork({ ...late, document: drawn(), activeSeconds: 60 }).submissionId).toMatch(/^sub_/);
  });

  it("goes on in another slot when its own was taken and one is free", () => {
    const [imageId] = market.imageIds;
    const lost = claim(0, { imageId });
    const next = claim(1, { imageId, nowMs: LATER_MS });
    expect(next.slot).toBe(lost.slot);
    heartbeat({ actor: someone(0), nowMs: LATER_MS, claimId: lost.id });
    expect(claimOf(lost.id)).toMatchObject({ status: "live", slot: 2 });
  });

  it("goes on although another person's lease on the last place ran out unnoticed", () => {
    const [imageId] = market.imageIds;
    const lost = claim(0, { imageId });
    const at = (minutes: number) => START_MS + minutes * MINUTE_MS;
    claim(1, { imageId, nowMs: at(21) }); // takes the place of the first, whose lease is over
    claim(2, { imageId, nowMs: at(21) });
    heartbeat({ actor: someone(0), nowMs: at(60), claimId: lost.id }); // by now both others are gone
    expect(claimOf(lost.id)?.status).toBe("live");
  });

  it("goes on in a batch that was paused meanwhile: work under way is not touched", () => {
    const held = claim(0);
    setPaused({ actor: market.owner, nowMs: START_MS, batchId: market.batchId, paused: true });
    expect(claim(0).id).toBe(held.id); // the desk can be opened again
    const late = { actor: someone(0), nowMs: LATER_MS, claimId: held.id };
    expect(submitWork({ ...late, document: drawn(), activeSeconds: 60 }).submissionId).toMatch(/^sub_/);
  });

  it("does not go on for an image that was settled without it", () => {
    const [imageId] = market.imageIds;
    const lost = claim(0, { imageId });
    work(market, someone(1), bottles(), { imageId, nowMs: LATER_MS });
    work(market, someone(2), bottles(), { imageId, nowMs: LATER_MS });
    settleImage({ imageId: imageId ?? "", nowMs: LATER_MS + 2 * MINUTE_MS });
    const late = { actor: someone(0), nowMs: LATER_MS + 3 * MINUTE_MS, claimId: lost.id };
    expect(refusalOf(() => heartbeat(late))).toBe("gone");
  });

  it("of a person who claimed the image anew points to the newer claim", () => {
    const [imageId] = market.imageIds;
    const lost = claim(0, { imageId });
    const anew = claim(0, { imageId, nowMs: LATER_MS });
    expect(anew.id).not.toBe(lost.id);
    claim(1, { imageId, nowMs: LATER_MS });
    const attempt = () => heartbeat({ actor: someone(0), nowMs: LATER_MS, claimId: lost.id });
    expect(refusalText(attempt)).toMatch(/newer claim/);
  });

  it("holds to its last millisecond for everybody", () => {
    const [imageId] = market.imageIds;
    const held = claim(0, { imageId });
    expect(claim(0, { imageId, nowMs: held.expiresAtMs }).id).toBe(held.id);
    expect(claim(0, { imageId, nowMs: held.expiresAtMs + 1 }).id).not.toBe(held.id);
  });
});

describe("a short image", () => {
  it("asks for one more person, before images that nobody began", () => {
    const [imageId] = market.imageIds;
    work(market, someone(0), strayBottles(0), { imageId });
    work(market, someone(1), strayBottles(1), { imageId });
    settleImage({ imageId: imageId ?? "", nowMs: START_MS + 5 * MINUTE_MS });
    const third = claim(2, { nowMs: START_MS + 6 * MINUTE_MS });
    expect(third).toMatchObject({ imageId, slot: 3 });
  });
});

describe("many people at once", () => {
  it("in several processes never get the same slot, and every slot is given out", async () => {
    const folder = mkdtempSync(path.join(os.tmpdir(), "merestone-claims-"));
    const file = path.join(folder, "market.sqlite");
    const stored = openDatabase(file);
    try {
      migrateDatabase(stored);
      setDb(stored);
      const crowded = openMarket(stored, { imageCount: 25, kMin: 3, kMax: 3 });
      const crowd = Array.from({ length: 90 }, () => person(stored, "annotator"));
      const half = (from: number) => crowd.slice(from, from + 30);
      const outcomes = await Promise.all(
        [0, 30, 60].map((from) => claimInProcess(file, crowded.batchId, half(from))),
      );
      const made = stored.select().from(claims).all();
      expect(outcomes.flat().filter((outcome) => outcome === "held")).toHaveLength(75);
      expect(outcomes.flat().filter((outcome) => outcome === "not_found")).toHaveLength(15);
      expect(new Set(made.map((row) => `${row.imageId} ${row.slot}`)).size).toBe(75);
      expect(made.every((row) => row.status === "live" && row.slot >= 1 && row.slot <= 3)).toBe(true);
    } finally {
      stored.$client.close();
      rmSync(folder, { recursive: true, force: true });
    }
  });
});

/** Lets each person claim once in a process of its own. */
async function claimInProcess(file: string, batchId: string, actors: Actor[]): Promise<string[]> {
  const told = JSON.stringify({ file, batchId, actors });
  const { stdout } = await run("node", ["--import", "tsx", "tests/support/claimProcess.ts", told]);
  return JSON.parse(stdout) as string[];
}
