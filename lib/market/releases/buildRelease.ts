import { createHash } from "node:crypto";
import { eq } from "drizzle-orm";
import { ZipFile } from "yazl";
import { getDb, inTransaction } from "@/db/client";
import { findBatch, findRelease } from "@/db/queries/batches";
import { releases } from "@/db/schema";
import { writeCoco } from "@/lib/formats/coco";
import { toSource, type OutputFile } from "@/lib/formats/dataset";
import { audit } from "@/lib/market/audit";
import { putObject } from "@/lib/services/store";
import { releaseContents, releaseText } from "./releaseContents";

/** Time of every file in the zip: the same labels give the same bytes. 1 January 1980 is the format's earliest. */
const ZIP_TIME = new Date(1980, 0, 1);

const text = (path: string, content: string): OutputFile => ({ path, bytes: Buffer.from(content, "utf8") });
const json = (path: string, value: unknown): OutputFile => text(path, `${JSON.stringify(value, null, 2)}\n`);

/** The job behind a release: gathers what is settled, writes every format, packs, stores, and says its hash. */
export async function buildRelease({
  releaseId,
  nowMs,
  progress,
}: {
  releaseId: string;
  nowMs: number;
  progress: (share: number, note?: string) => void;
}): Promise<void> {
  const db = getDb();
  const release = findRelease(db, releaseId);
  const batch = release && findBatch(db, release.batchId);
  if (!release || !batch || release.status !== "building") return;
  progress(0.1, "gathering");
  const { dataset, quality, provenance } = releaseContents(db, batch);
  const files: OutputFile[] = [
    text("README.txt", releaseText(batch, release.number, quality)),
    text(
      "coco/instances.json",
      [...writeCoco(toSource(dataset), { description: batch.title, version: String(release.number) })].join(
        "",
      ),
    ),
    json("quality.json", quality),
    json("provenance.json", provenance),
  ];
  progress(0.6, "packing");
  const zip = await pack(bag(files));
  const sha256 = createHash("sha256").update(zip).digest("hex");
  const storageKey = `batches/${batch.id}/releases/${release.number}-${sha256.slice(0, 16)}.zip`;
  await putObject(storageKey, zip, "application/zip");
  inTransaction(db, (tx) => {
    tx.update(releases)
      .set({
        status: "ready",
        storageKey,
        sha256,
        byteSize: zip.byteLength,
        imageCount: quality.images,
        instanceCount: quality.instances,
        quality,
        readyAtMs: nowMs,
      })
      .where(eq(releases.id, releaseId))
      .run();
    audit(tx, {
      actorId: release.requestedBy,
      action: "release.built",
      subject: batch.id,
      detail: { number: release.number, sha256 },
      nowMs,
    });
  });
}

/** Files as a bag of RFC 8493: payload under data/, a manifest of SHA-256 sums, and the tag files. */
function bag(files: readonly OutputFile[]): OutputFile[] {
  const payload = files.map(({ path, bytes }) => ({ path: `data/${path}`, bytes }));
  const sum = ({ path, bytes }: OutputFile) =>
    `${createHash("sha256").update(bytes).digest("hex")}  ${path}\n`;
  const octets = payload.reduce((total, { bytes }) => total + bytes.byteLength, 0);
  const tags = [
    text("bagit.txt", "BagIt-Version: 1.0\nTag-File-Character-Encoding: UTF-8\n"),
    text("bag-info.txt", `Payload-Oxum: ${octets}.${payload.length}\n`),
    text("manifest-sha256.txt", payload.map(sum).join("")),
  ];
  return [...tags, text("tagmanifest-sha256.txt", tags.map(sum).join("")), ...payload];
}

function pack(files: readonly OutputFile[]): Promise<Buffer> {
  const zip = new ZipFile();
  for (const { path, bytes } of files)
    zip.addBuffer(Buffer.from(bytes), path, { mtime: ZIP_TIME, mode: 0o100644 });
  zip.end();
  return new Promise((resolve, reject) => {
    const chunks: Buffer[] = [];
    zip.outputStream.on("data", (chunk: Buffer) => chunks.push(chunk));
    zip.outputStream.on("error", reject);
    zip.outputStream.on("end", () => resolve(Buffer.concat(chunks)));
  });
}
