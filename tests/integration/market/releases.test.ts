import { createHash } from "node:crypto";
import { eq } from "drizzle-orm";
import sharp, { type Sharp } from "sharp";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { inTransaction, type Db } from "@/db/client";
import { findImage, findRelease } from "@/db/queries/batches";
import { images, type ReleaseOptions } from "@/db/schema";
import { shapeToStored, uprightSize, type Orientation } from "@/lib/geometry/orientation";
import type { Box } from "@/lib/geometry/types";
import { buildRelease } from "@/lib/market/releases/buildRelease";
import { openRelease } from "@/lib/market/releases/openRelease";
import { requestRelease } from "@/lib/market/releases/requestRelease";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { ensureBucket, getObject, putObject } from "@/lib/services/store";
import { freshDb } from "@/tests/support/db";
import { pointStoreAt, startTestFakes, type TestFakes } from "@/tests/support/fakes";
import {
  bottles,
  MINUTE_MS,
  openMarket,
  person,
  refusalOf,
  settledImage,
  START_MS,
  work,
  type Market,
} from "@/tests/support/market";
import { unzip } from "@/tests/support/unzip";

let fakes: TestFakes;
beforeAll(async () => {
  fakes = await startTestFakes();
  pointStoreAt(fakes);
  await ensureBucket();
});
afterAll(() => fakes.remove());

let db: Db;
let market: Market;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 2, kMin: 2, kMax: 3 });
  settledImage(market);
});

type Coco = {
  images: { id: number; file_name: string; width: number; height: number }[];
  annotations: { image_id: number; bbox: Box }[];
};

async function release(options: Partial<ReleaseOptions> = {}) {
  const releaseId = requestRelease({
    actor: market.owner,
    nowMs: START_MS,
    batchId: market.batchId,
    ...options,
  });
  await buildRelease({ releaseId, nowMs: START_MS, progress: () => undefined });
  const row = findRelease(db, releaseId);
  const zip = await getObject(row?.storageKey ?? "");
  const files = await unzip(zip);
  const json = <T>(name: string) => JSON.parse(files.get(name)?.toString("utf8") ?? "null") as T;
  return { releaseId, row, zip, files, json, coco: json<Coco>("data/coco/instances.json") };
}

const sha256 = (bytes: Buffer) => createHash("sha256").update(bytes).digest("hex");
const amend = (imageId: string | undefined, change: Partial<typeof images.$inferInsert>) =>
  inTransaction(db, (tx) =>
    tx
      .update(images)
      .set(change)
      .where(eq(images.id, imageId ?? ""))
      .run(),
  );
async function storePicture(imageId: string | undefined, width = 640, height = 480): Promise<Buffer> {
  const bytes = await sharp({ create: { width, height, channels: 3, background: "#c9a66b" } })
    .png()
    .toBuffer();
  await putObject(findImage(db, imageId ?? "")?.workingKey ?? "", bytes, "image/png");
  return bytes;
}

describe("a release", () => {
  it("is a bag whose every checksum fits, and says its own", async () => {
    const { row, zip, files } = await release();
    expect(row).toMatchObject({ status: "ready", imageCount: 1, instanceCount: 3, byteSize: zip.byteLength });
    expect(row?.sha256).toBe(sha256(zip));
    const lines = (files.get("manifest-sha256.txt")?.toString("utf8") ?? "").trim().split("\n");
    for (const line of lines) {
      const [sum, name = ""] = line.split("  ");
      expect(sha256(files.get(name) ?? Buffer.alloc(0)), name).toBe(sum);
    }
    expect(lines).toHaveLength([...files.keys()].filter((name) => name.startsWith("data/")).length);
    expect(lines.length).toBeGreaterThan(6);
  });

  it("holds what is settled, and states that no licence is given", async () => {
    const { coco, files } = await release();
    expect(coco.images).toMatchObject([{ file_name: "pole-000.png", width: 640, height: 480 }]);
    expect(coco.annotations).toHaveLength(3);
    expect(files.get("data/README.txt")?.toString("utf8")).toMatch(/none is stated/);
  });

  it("with a licence carries it into its words and its metadata", async () => {
    const { files, json } = await release({ licence: "CC-BY-4.0" });
    expect(files.get("data/README.txt")?.toString("utf8")).toContain("CC-BY-4.0");
    expect(json<{ license: string }>("data/croissant.json").license).toBe(
      "https://spdx.org/licenses/CC-BY-4.0",
    );
  });

  it("with pictures holds the working copies byte for byte, and its manifest covers them", async () => {
    const [imageId] = market.imageIds;
    amend(imageId, { fileName: "pole.TIFF", mediaType: "image/tiff" });
    const bytes = await storePicture(imageId);
    const { files, coco, json } = await release({ withPictures: true });
    expect(files.get("data/pictures/pole.png")?.equals(bytes)).toBe(true);
    expect(files.get("manifest-sha256.txt")?.toString("utf8")).toContain(
      `${sha256(bytes)}  data/pictures/pole.png`,
    );
    // The labels name the picture that lies beside them, and say what it was uploaded as.
    expect(coco.images[0]?.file_name).toBe("pole.png");
    expect(json<{ images: unknown[] }>("data/provenance.json").images[0]).toMatchObject({
      fileName: "pole.png",
      uploadedAs: "pole.TIFF",
    });
  });

  it("keeps apart pictures of the same name", async () => {
    const [first, second] = market.imageIds;
    for (const hand of [2, 3])
      work(market, market.annotators[hand] ?? market.owner, bottles(hand), { imageId: second });
    settleImage({ imageId: second ?? "", nowMs: START_MS + 9 * MINUTE_MS });
    amend(first, { fileName: "a.png" });
    amend(second, { fileName: "A.png" });
    const { coco } = await release();
    expect(coco.images.map((image) => image.file_name)).toEqual(["a.png", "A-2.png"]);
  });

  it("in coordinates of the file as uploaded fits its pixels before the orientation is applied", async () => {
    const [imageId] = market.imageIds;
    amend(imageId, { exifOrientation: 6 });
    const upright = (await release()).coco;
    const stored = await release({ coordinates: "stored" });
    expect(stored.coco.images[0]).toMatchObject({ width: 480, height: 640 });
    for (const [index, { bbox }] of upright.annotations.entries()) {
      const [x, y, w, h] = bbox;
      // Orientation 6: the file's first row is the right side of the upright picture.
      expect(stored.coco.annotations[index]?.bbox).toEqual([y, 640 - x - w, h, w]);
    }
    expect(stored.json<{ coordinates: string }>("data/provenance.json").coordinates).toBe("stored");
  });

  it("has pictures or coordinates as uploaded, not both", () => {
    const ask = { actor: market.owner, nowMs: START_MS, batchId: market.batchId };
    expect(refusalOf(() => requestRelease({ ...ask, withPictures: true, coordinates: "stored" }))).toBe(
      "invalid",
    );
  });

  it("of the same labels and options has the same bytes", async () => {
    const once = await release();
    const again = await release();
    const labels = (files: Map<string, Buffer>) =>
      sha256(files.get("data/coco/instances.json") ?? Buffer.alloc(0));
    expect(labels(again.files)).toBe(labels(once.files));
    expect(again.row?.number).toBe(2);
  });

  it("is for the team that posted the batch", async () => {
    const { releaseId } = await release();
    const stranger = person(db, "requester");
    await expect(openRelease({ actor: stranger, releaseId })).rejects.toMatchObject({ code: "not_found" });
  });
});

describe("a box of the upright picture", () => {
  // libvips is the judge: it turns a picture upright by its tag, and both pictures are searched for the red box.
  it.each([1, 2, 3, 4, 5, 6, 7, 8] as Orientation[])(
    "is found in the stored pixels under EXIF orientation %i",
    async (orientation) => {
      const [width, height] = [40, 30];
      const box: Box = [7, 11, 9, 5];
      const red = { create: { width: box[2], height: box[3], channels: 3, background: "#ff0000" } } as const;
      const file = await sharp({ create: { width, height, channels: 3, background: "#0000ff" } })
        .composite([{ input: await sharp(red).png().toBuffer(), left: box[0], top: box[1] }])
        .withMetadata({ orientation })
        .tiff({ compression: "none" })
        .toBuffer();
      const stored = await redBox(sharp(file).removeAlpha());
      const upright = await redBox(sharp(file).autoOrient().removeAlpha());
      expect(stored).toEqual(box);
      expect(uprightSize(40, 30, orientation)).toEqual(orientation >= 5 ? [30, 40] : [40, 30]);
      const back = shapeToStored({ kind: "box", box: upright }, width, height, orientation);
      expect(back).toEqual({ kind: "box", box });
    },
  );
});

async function redBox(picture: Sharp): Promise<Box> {
  const { data, info } = await picture.raw().toBuffer({ resolveWithObject: true });
  let [x0, y0, x1, y1] = [Infinity, Infinity, -1, -1];
  for (let y = 0; y < info.height; y++)
    for (let x = 0; x < info.width; x++)
      if ((data[(y * info.width + x) * info.channels] ?? 0) > 128)
        [x0, y0, x1, y1] = [Math.min(x0, x), Math.min(y0, y), Math.max(x1, x), Math.max(y1, y)];
  return [x0, y0, x1 - x0 + 1, y1 - y0 + 1];
}
