import { createHash } from "node:crypto";
import { eq, sql } from "drizzle-orm";
import sharp from "sharp";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { jobs } from "@/db/schema";
import { checkImage } from "@/lib/market/images/checkImage";
import { openImage } from "@/lib/market/images/openImage";
import { ensureBucket, findObjectSize, putObject } from "@/lib/services/store";
import { freshDb } from "@/tests/support/db";
import { pointStoreAt, startTestFakes, type TestFakes } from "@/tests/support/fakes";
import { draftBatch, image, person, START_MS, team } from "@/tests/support/market";

let fakes: TestFakes;
beforeAll(async () => {
  fakes = await startTestFakes();
  pointStoreAt(fakes);
  await ensureBucket();
});
afterAll(() => fakes.remove());

let db: Db;
let batchId: string;
const owner = () => person(db, "requester");
let actor: ReturnType<typeof owner>;
beforeEach(() => {
  db = freshDb();
  actor = owner();
  batchId = draftBatch(db, actor, team(db, actor), { imageCount: 0 });
});

const picture = () => sharp({ create: { width: 64, height: 48, channels: 3, background: "#c9a66b" } });
/** A file that has just arrived in the object store. */
async function arrived(bytes: Buffer, mediaType: string, sha256?: string): Promise<string> {
  const imageId = image(db, batchId, {
    status: "checking",
    mediaType,
    workingKey: null,
    width: null,
    height: null,
    sha256: sha256 ?? createHash("sha256").update(bytes).digest("hex"),
  });
  await putObject(originalOf(imageId), bytes, mediaType);
  return imageId;
}
const originalOf = (imageId: string) => findImage(db, imageId)?.originalKey ?? "";
const check = (imageId: string) => checkImage({ imageId, nowMs: START_MS });

describe("checking an upload", () => {
  it("makes the copies, measures, asks for proposals, and leaves no original with its metadata", async () => {
    const imageId = await arrived(await picture().jpeg().toBuffer(), "image/jpeg");
    await check(imageId);
    const checked = findImage(db, imageId);
    expect(checked).toMatchObject({ status: "ready", width: 64, height: 48, exifOrientation: 1 });
    expect(await findObjectSize(checked?.workingKey ?? "")).toBeGreaterThan(0);
    expect(await findObjectSize(checked?.thumbKey ?? "")).toBeGreaterThan(0);
    expect(await findObjectSize(originalOf(imageId))).toBeNull();
    expect(db.select().from(jobs).where(eq(jobs.kind, "image.propose")).all()).toHaveLength(1);
  });

  it("refuses what is no picture, with the reason, and stores nothing of it", async () => {
    const imageId = await arrived(Buffer.from("%PDF-1.7"), "image/png");
    await check(imageId);
    expect(findImage(db, imageId)).toMatchObject({ status: "refused", workingKey: null });
    expect(findImage(db, imageId)?.refusal).toMatch(/not a JPEG, PNG/);
    expect(await findObjectSize(originalOf(imageId))).toBeNull();
  });

  it("refuses bytes that are not those that were announced", async () => {
    const imageId = await arrived(await picture().png().toBuffer(), "image/png", "0".repeat(64));
    await check(imageId);
    expect(findImage(db, imageId)?.refusal).toMatch(/changed on its way/);
  });

  it("survives a crash at its last moment: the next attempt ends it, and the original goes then", async () => {
    const imageId = await arrived(await picture().png().toBuffer(), "image/png");
    db.run(sql`create trigger crash before insert on jobs begin select raise(abort, 'power is out'); end`);
    await expect(check(imageId)).rejects.toThrow();
    expect(findImage(db, imageId)?.status).toBe("checking");
    db.run(sql`drop trigger crash`);
    await check(imageId);
    expect(findImage(db, imageId)?.status).toBe("ready");
    expect(await findObjectSize(originalOf(imageId))).toBeNull();
  });

  it("run again removes an original that a crash had left", async () => {
    const bytes = await picture().png().toBuffer();
    const imageId = await arrived(bytes, "image/png");
    await check(imageId);
    await putObject(originalOf(imageId), bytes, "image/png");
    await check(imageId);
    expect(await findObjectSize(originalOf(imageId))).toBeNull();
    expect(findImage(db, imageId)?.status).toBe("ready");
  });

  it("serves a copy as what it is, whatever type the browser had announced", async () => {
    const imageId = await arrived(await picture().png().toBuffer(), "image/jpeg");
    await check(imageId);
    const opened = await openImage({ actor, imageId, variant: "working" });
    expect(opened.mediaType).toBe("image/png");
    await opened.stream.cancel();
  });
});
