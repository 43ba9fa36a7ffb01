import { afterAll, beforeAll, beforeEach, expect, it, vi } from "vitest";
import type { Db } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { jobs } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { completeUpload } from "@/lib/market/images/completeUpload";
import {
  completeMultipart,
  ensureBucket,
  listParts,
  presignPart,
  startMultipart,
} from "@/lib/services/store";
import { freshDb } from "@/tests/support/db";
import { S3_KEYS, startTestFakes, type TestFakes } from "@/tests/support/fakes";
import { draftBatch, image, person, START_MS, team } from "@/tests/support/market";

let fakes: TestFakes;
beforeAll(async () => {
  fakes = await startTestFakes();
  vi.stubEnv("S3_ENDPOINT", fakes.s3.url);
  vi.stubEnv("S3_REGION", S3_KEYS.region);
  vi.stubEnv("S3_ACCESS_KEY_ID", S3_KEYS.accessKeyId);
  vi.stubEnv("S3_SECRET_ACCESS_KEY", S3_KEYS.secretAccessKey);
  await ensureBucket();
});
afterAll(() => fakes.remove());

let db: Db;
let actor: Actor;
beforeEach(() => {
  db = freshDb();
  actor = person(db, "requester");
});

/** An image whose one part is up and not yet joined. */
async function partsUp() {
  const batchId = draftBatch(db, actor, team(db, actor), { imageCount: 0 });
  const key = `batches/${batchId}/uploads/large`;
  const uploadId = await startMultipart(key, "image/png");
  await fetch(await presignPart(key, uploadId, 1), { method: "PUT", body: Buffer.alloc(1000, 7) });
  const imageId = image(db, batchId, { status: "awaiting", uploadId, originalKey: key });
  return { imageId, key, uploadId, parts: (await listParts(key, uploadId)) ?? [] };
}
const checks = () =>
  db
    .select()
    .from(jobs)
    .all()
    .filter((job) => job.kind === "image.check");

it("an upload that was joined before the process died is taken when the browser says so again", async () => {
  const { imageId, key, uploadId, parts } = await partsUp();
  await completeMultipart(key, uploadId, parts); // and there the process died
  await completeUpload({ actor, nowMs: START_MS, imageId, parts });
  expect(findImage(db, imageId)).toMatchObject({ status: "checking", uploadId: null });
  expect(checks()).toHaveLength(1);
});

it("an upload that the store has forgotten, with no file, is to be sent again", async () => {
  const { imageId, parts } = await partsUp();
  const lost = image(db, findImage(db, imageId)?.batchId ?? "", {
    status: "awaiting",
    uploadId: "no-such-upload",
    originalKey: "batches/lost",
  });
  await expect(completeUpload({ actor, nowMs: START_MS, imageId: lost, parts })).rejects.toMatchObject({
    code: "conflict",
  });
  expect(checks()).toEqual([]);
});
