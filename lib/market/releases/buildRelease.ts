import { createHash } from "node:crypto";
import { eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findBatch, findRelease, type BatchRow, type ReleaseRow } from "@/db/queries/batches";
import { findTeam } from "@/db/queries/people";
import { releases } from "@/db/schema";
import { env } from "@/lib/env";
import { bagOf, sha256Of } from "@/lib/formats/bagit";
import { croissantText } from "@/lib/formats/croissant";
import { toSource, type Dataset, type OutputFile } from "@/lib/formats/dataset";
import { writeDataset, WRITE_FORMATS, type WriteFormat } from "@/lib/formats/formats";
import { zipBytes } from "@/lib/formats/zip";
import { audit } from "@/lib/market/audit";
import { putObject } from "@/lib/services/store";
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
  const { dataset, quality, provenance } = releaseContents(db, batch);
  const files: OutputFile[] = [
    text("README.txt", releaseText(batch, release.number, quality)),
    json("quality.json", quality),
    json("provenance.json", provenance),
  ];
  for (const [index, format] of WRITE_FORMATS.entries()) {
    progress(0.2 + (0.5 * index) / WRITE_FORMATS.length, `writing ${format}`);
    files.push(...filesOf(format, dataset));
  }
  files.push(
    text(
      "croissant.json",
      metadataOf({ batch, release, teamName: findTeam(db, batch.teamId)?.name ?? "", dataset, files }),
    ),
  );
  progress(0.8, "packing");
  const date = new Date(release.createdAtMs).toISOString().slice(0, 10);
  const bag = bagOf(files, { "External-Description": batch.title, "Bagging-Date": date });
  const zip = Buffer.from(await zipBytes(bag));
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
    const detail = { number: release.number, sha256 };
    audit(tx, { actorId: release.requestedBy, action: "release.built", subject: batch.id, detail, nowMs });
  });
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
  files: readonly OutputFile[];
};

/** Croissant metadata of the release. The team that asked for the labels states the licence of its data itself. */
function metadataOf({ batch, release, teamName, dataset, files }: Described): string {
  return croissantText({
    name: batch.title,
    description: `Instance labels agreed on by several annotators: ${batch.title}, release ${release.number}.`,
    license: "https://spdx.org/licenses/NONE",
    url: new URL(`/batches/${batch.id}`, env().APP_URL).href,
    version: `${release.number}.0.0`,
    datePublished: new Date(release.createdAtMs).toISOString().slice(0, 10),
    creators: [teamName],
    classes: dataset.classes,
    files: files.map(({ path, bytes }) => ({
      path,
      sha256: sha256Of(bytes),
      sizeBytes: bytes.byteLength,
      encodingFormat: MEDIA_TYPES[path.split(".").pop() ?? ""] ?? "application/octet-stream",
    })),
    cocoPath: COCO_PATH,
  });
}
