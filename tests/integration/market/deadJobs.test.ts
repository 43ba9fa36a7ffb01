import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { noteDeadJobs } from "@/db/queries/system";
import { images, jobs, releases } from "@/db/schema";
import { enqueue, failJob, takeJob } from "@/lib/jobs/queue";
import { newId } from "@/lib/ids";
import { freshDb } from "../../support/db";
import { openMarket } from "../../support/market";

let db: Db;
beforeEach(() => {
  db = freshDb();
});

const NOW = 1_700_000_000_000;

function dieOn(
  kind: "image.propose" | "release.build",
  payload: { imageId: string } | { releaseId: string },
): void {
  enqueue(db, { kind, payload: payload as never, nowMs: NOW, priority: 99, attemptsMax: 1 });
  const job = takeJob(db, "worker", NOW + 1);
  expect(job?.kind).toBe(kind);
  if (job) failJob(db, job, new Error("broken"), NOW + 2);
}

describe("a dead job", () => {
  it("shows on its image and release, and leaves alone what has another attempt queued", () => {
    const market = openMarket(db, { imageCount: 2 });
    const [image, other] = db.select().from(images).where(eq(images.batchId, market.batchId)).all();
    if (!image || !other) throw new Error("the market has two images");
    db.update(images).set({ proposalState: "queued" }).run();
    const releaseId = newId("rel");
    db.insert(releases)
      .values({
        id: releaseId,
        batchId: market.batchId,
        number: 1,
        status: "building",
        requestedBy: market.owner.id,
        createdAtMs: NOW,
      })
      .run();
    dieOn("image.propose", { imageId: image.id });
    dieOn("release.build", { releaseId });
    expect(noteDeadJobs(db)).toBe(2);
    expect(noteDeadJobs(db)).toBe(0);
    const state = (id: string) => db.select().from(images).where(eq(images.id, id)).get()?.proposalState;
    expect([state(image.id), state(other.id)]).toEqual(["failed", "queued"]);
    expect(db.select().from(releases).get()?.status).toBe("failed");
    db.update(images).set({ proposalState: "queued" }).run();
    enqueue(db, { kind: "image.propose", payload: { imageId: image.id }, nowMs: NOW });
    expect(noteDeadJobs(db)).toBe(0);
    expect(db.select().from(jobs).all().length).toBeGreaterThan(2);
  });
});
