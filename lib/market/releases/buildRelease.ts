import { createHash } from "node:crypto";
import { Readable } from "node:stream";
import { eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findBatch, findRelease, type BatchRow, type ReleaseRow } from "@/db/queries/batches";
import { findTeam } from "@/db/queries/people";
import { releases } from "@/db/schema";
import { env } from "@/lib/env";
import { bagTagFiles, payloadEntry, type PayloadEntry } from "@/lib/formats/bagit";
import { croissantText } from "@/lib/formats/croissant";
import { toSource, type Dataset, type OutputFile } from "@/lib/formats/dataset";
import { writeDataset, WRITE_FORMATS, type WriteFormat } from "@/lib/formats/formats";
import { zipStream } from "@/lib/formats/zip";
import { audit } from "@/lib/market/audit";
import { putStream, readObject } from "@/lib/services/store";
import { releaseContents, releaseText } from "./releaseContents";

const COCO_PATH = "coco/instances.json";

/** Where each one-file format goes; the others are folders under their own name. */
const FILE_OF: Partial<Record<WriteFormat, string>> = {
  coco: COCO_PATH,
  geojson: "geojson/instances.geojson",
  webannotation: "webannotation/annotations.jsonld",
  csv: "csv/instances.csv",
};

const MEDIA_TYPES: Record<string, string> = {
  json: "application/json",
  jsonld: "application/ld+json",
  geojson: "application/geo+json",
  csv: "text/csv",
  xml: "application/xml",
  png: "image/png",
  jpg: "image/jpeg",
  jpeg: "image/jpeg",
  txt: "text/plain",
};

const text = (path: string, content: string): OutputFile => ({ path, bytes: Buffer.from(content, "utf8") });
const json = (path: string, value: unknown): OutputFile => text(path, `${JSON.stringify(value, null, 2)}\n`);

type Input = { releaseId: string; nowMs: number; progress: (share: number, note?: string) => void };

/**
 * The job behind a release: gathers what is settled, writes every format, packs it as a bag with checksums,
 * stores it, and says its hash. The same labels and number give the same bytes.
 */
export async function buildRelease({ releaseId, nowMs, progress }: Input): Promise<void> {
  const db = getDb();
  const release = findRelease(db, releaseId);
  const batch = release && findBatch(db, release.batchId);
  if (!release || !batch || release.status !== "building") return;
  progress(0.1, "gathering");
  const { options } = release;
  const { dataset, quality, provenance, pictures } = releaseContents(db, batch, options);
  const files: OutputFile[] = [
    text("README.txt", releaseText(batch, release, quality)),
    json("quality.json", quality),
    json("provenance.json", provenance),
  ];
  for (const [index, format] of WRITE_FORMATS.entries()) {
    progress(0.1 + (0.3 * index) / WRITE_FORMATS.length, `writing ${format}`);
    files.push(...filesOf(format, dataset));
  }
  // Pictures are read twice, to be named in the manifest and to be packed, so that none is held in memory.
  const stored: StoredFile[] = [];
  for (const [index, { path, storageKey }] of pictures.entries()) {
    progress(0.4 + (0.2 * index) / pictures.length, `checking picture ${index + 1} of ${pictures.length}`);
    stored.push({ path, storageKey, ...(await measureObject(storageKey)) });
  }
  const teamName = findTeam(db, batch.teamId)?.name ?? "";
  const payload = [...files.map(payloadEntry), ...stored];
  files.push(text("croissant.json", metadataOf({ batch, release, teamName, dataset, payload })));
  progress(0.6, "packing");
  const date = new Date(release.createdAtMs).toISOString().slice(0, 10);
  const bagInfo = { "External-Description": batch.title, "Bagging-Date": date };
  const storageKey = `batches/${batch.id}/releases/${release.number}-${release.id}.zip`;
  const { sha256, sizeBytes } = await storeBag(storageKey, files, stored, bagInfo);
  inTransaction(db, (tx) => {
    tx.update(releases)
      .set({
        status: "ready",
        storageKey,
        sha256,
        byteSize: sizeBytes,
        imageCount: quality.images,
        instanceCount: quality.instances,
        quality,
        readyAtMs: nowMs,
      })
      .where(eq(releases.id, releaseId))
      .run();
    const detail = { number: release.number, sha256 };
    audit(tx, { actorId: release.requestedBy, action: "release.built", subject: batch.id, detail, nowMs });
  });
}

type StoredFile = PayloadEntry & { storageKey: string };

/** SHA-256 and size of an object, read as a stream. */
async function measureObject(storageKey: string): Promise<{ sha256: string; sizeBytes: number }> {
  const meter = new Meter();
  for await (const chunk of meter.pass(await readObject(storageKey))) void chunk;
  return meter.result();
}

/** Packs files at hand and files in the object store as a bag, straight into the object store. */
async function storeBag(
  storageKey: string,
  files: readonly OutputFile[],
  stored: readonly StoredFile[],
  bagInfo: Record<string, string>,
): Promise<{ sha256: string; sizeBytes: number }> {
  const tags = bagTagFiles([...files.map(payloadEntry), ...stored], bagInfo);
  const data = [
    ...files.map(({ path, bytes }) => ({ path: `data/${path}`, bytes })),
    ...stored.map((file) => ({
      path: `data/${file.path}`,
      sizeBytes: file.sizeBytes,
      open: () => readObject(file.storageKey),
    })),
  ].toSorted((a, b) => (a.path < b.path ? -1 : 1));
  const meter = new Meter();
  await putStream(storageKey, Readable.from(meter.pass(zipStream([...tags, ...data]))), "application/zip");
  return meter.result();
}

/** Counts and hashes the bytes that pass through it. */
class Meter {
  private readonly hash = createHash("sha256");
  private sizeBytes = 0;
  async *pass(source: Readable): AsyncGenerator<Buffer> {
    for await (const part of source) {
      const chunk = Buffer.from(part as Uint8Array);
      this.hash.update(chunk);
      this.sizeBytes += chunk.byteLength;
      yield chunk;
    }
  }
  result() {
    return { sha256: this.hash.digest("hex"), sizeBytes: this.sizeBytes };
  }
}

function filesOf(format: WriteFormat, dataset: Dataset): OutputFile[] {
  const written = writeDataset(format, toSource(dataset));
  if (written.kind === "file")
    return [text(FILE_OF[format] ?? `${format}/instances`, [...written.text].join(""))];
  return [...written.files].map(({ path, bytes }) => ({ path: `${format}/${path}`, bytes }));
}

type Described = {
  batch: BatchRow;
  release: ReleaseRow;
  teamName: string;
  dataset: Dataset;
  payload: readonly PayloadEntry[];
};

/** Croissant metadata of the release. The team that asked for the labels states the licence of its data itself. */
function metadataOf({ batch, release, teamName, dataset, payload }: Described): string {
  return croissantText({
    name: batch.title,
    description: `Instance labels agreed on by several annotators: ${batch.title}, release ${release.number}.`,
    license: `https://spdx.org/licenses/${release.options.licence || "NONE"}`,
    url: new URL(`/batches/${batch.id}`, env().APP_URL).href,
    version: `${release.number}.0.0`,
    datePublished: new Date(release.createdAtMs).toISOString().slice(0, 10),
    creators: [teamName],
    classes: dataset.classes,
    files: payload.map(({ path, sha256, sizeBytes }) => ({
      path,
      sha256,
      sizeBytes,
      encodingFormat: MEDIA_TYPES[path.split(".").pop()?.toLowerCase() ?? ""] ?? "application/octet-stream",
    })),
    cocoPath: COCO_PATH,
  });
}
