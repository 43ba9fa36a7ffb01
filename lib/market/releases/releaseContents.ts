import { createHash } from "node:crypto";
import type { Reader } from "@/db/client";
import { findBrief, listClasses, type BatchRow, type ImageRow, type ReleaseRow } from "@/db/queries/batches";
import { listAnnotatorsOf, listCurrentRuns } from "@/db/queries/work";
import type { ReleaseOptions } from "@/db/schema";
import type { Dataset, DatasetAnnotation } from "@/lib/formats/dataset";
import { isOrientation, shapeToStored, uprightSize } from "@/lib/geometry/orientation";

/** What a release states of its own quality. */
export type ReleaseQuality = {
  images: number;
  instances: number;
  agreement: { mean: number; target: number };
  /** Expected panoptic quality against the truth, mean over images with the mean ends of its 95 % intervals. */
  predictedQuality: { value: number; low: number; high: number };
  perClass: {
    name: string;
    instances: number;
    expectedIou: number;
    meanSupport: number;
    meanSpread: number;
  }[];
  decidedByAdmin: number;
  annotators: number;
};

const mean = (values: readonly number[]) =>
  values.length === 0 ? 0 : values.reduce((sum, value) => sum + value, 0) / values.length;
const rounded = (value: number) => Math.round(value * 10_000) / 10_000;

/**
 * The settled labels of a batch as a dataset, with the quality they claim, where each came from, and the pictures
 * that go with them. A picture in the release keeps its name but for the ending of its working copy's type.
 * Annotators appear by a pseudonym that differs from batch to batch. Same database, same result.
 */
export function releaseContents(db: Reader, batch: BatchRow, options: ReleaseOptions) {
  const key = listClasses(db, batch.id);
  const numberOf = new Map(key.map((row) => [row.id, row.number]));
  const settled = listCurrentRuns(db, batch.id).filter(({ image }) => image.consensusState === "settled");
  const pseudonym = (annotatorId: string) =>
    `annotator-${createHash("sha256").update(`${batch.id}/${annotatorId}`).digest("hex").slice(0, 10)}`;
  const annotations: DatasetAnnotation[] = [];
  const names = uniqueNames(
    settled.map(({ image }) => (options.withPictures ? pictureName(image) : image.fileName)),
  );
  const images = settled.map(({ run, image }, index) => {
    const upright = [image.width ?? 0, image.height ?? 0] as const;
    const orientation =
      options.coordinates === "stored" && isOrientation(image.exifOrientation) ? image.exifOrientation : 1;
    const [width, height] = uprightSize(...upright, orientation); // the same turn leads back
    for (const instance of run.result.agreed) {
      annotations.push({
        id: annotations.length + 1,
        imageId: index + 1,
        classId: numberOf.get(instance.classId) ?? 0,
        shape: shapeToStored(instance.shape, width, height, orientation),
        crowd: instance.crowd,
        score: rounded(instance.score),
        support: instance.support,
        spread: rounded(instance.spread),
      });
    }
    return {
      id: index + 1,
      fileName: names[index] ?? image.fileName,
      width,
      height,
      sha256: image.sha256,
    };
  });
  const dataset: Dataset = {
    images,
    classes: key.map(({ number, name }) => ({ id: number, name })),
    annotations,
  };
  const all = settled.flatMap(({ run }) => run.result.agreed);
  const quality: ReleaseQuality = {
    images: images.length,
    instances: annotations.length,
    agreement: {
      mean: rounded(mean(settled.map(({ run }) => run.agreement))),
      target: batch.agreementTarget,
    },
    predictedQuality: {
      value: rounded(mean(settled.map(({ run }) => run.result.predictedQuality.value))),
      low: rounded(mean(settled.map(({ run }) => run.result.predictedQuality.low))),
      high: rounded(mean(settled.map(({ run }) => run.result.predictedQuality.high))),
    },
    perClass: key.map((row) => {
      const own = all.filter((instance) => instance.classId === row.id);
      return {
        name: row.name,
        instances: own.length,
        expectedIou: rounded(mean(own.map((instance) => instance.predictedIou))),
        meanSupport: rounded(mean(own.map((instance) => instance.support))),
        meanSpread: rounded(mean(own.map((instance) => instance.spread))),
      };
    }),
    decidedByAdmin: settled.filter(({ run }) => run.origin === "decision").length,
    annotators: listAnnotatorsOf(db, batch.id).length,
  };
  const provenance = {
    batch: batch.title,
    brief: { version: batch.briefVersion, markdown: findBrief(db, batch.id)?.markdown ?? "" },
    redundancy: { fewest: batch.kMin, most: batch.kMax, agreementTarget: batch.agreementTarget },
    coordinates: options.coordinates,
    licence: options.licence,
    images: settled.map(({ run, image }, index) => ({
      fileName: names[index] ?? image.fileName,
      uploadedAs: image.fileName,
      sha256: image.sha256,
      uprightWidth: image.width,
      uprightHeight: image.height,
      exifOrientation: image.exifOrientation ?? 1,
      origin: run.origin === "decision" ? "decided by an admin" : "merged from submissions",
      settledAt: new Date(image.settledAtMs ?? run.createdAtMs).toISOString(),
      agreement: rounded(run.agreement),
      submissions: run.result.scores.map((score) => ({
        annotator: pseudonym(score.annotatorId),
        found: score.found,
        missed: score.missed,
        unsupported: score.spurious,
        quality: rounded(score.quality),
      })),
    })),
  };
  const pictures = options.withPictures
    ? settled.map(({ image }, index) => ({
        path: `pictures/${names[index] ?? image.fileName}`,
        storageKey: image.workingKey ?? "",
      }))
    : [];
  return { dataset, quality, provenance, pictures };
}

/** Name of a working copy: lossless uploads are kept as PNG, all others as JPEG. */
function pictureName({ fileName, mediaType }: ImageRow): string {
  const isPng = mediaType === "image/png" || mediaType === "image/tiff";
  const fits = isPng ? /\.png$/i : /\.jpe?g$/i;
  return fits.test(fileName) ? fileName : `${fileName.replace(/\.[^.]*$/, "")}.${isPng ? "png" : "jpg"}`;
}

/** The same names, a number put before the ending of each that came before in any case of letters. */
function uniqueNames(names: readonly string[]): string[] {
  const taken = new Set<string>();
  return names.map((name) => {
    const dot = name.lastIndexOf(".") > 0 ? name.lastIndexOf(".") : name.length;
    let unique = name;
    for (let n = 2; taken.has(unique.toLowerCase()); n++)
      unique = `${name.slice(0, dot)}-${n}${name.slice(dot)}`;
    taken.add(unique.toLowerCase());
    return unique;
  });
}

/** What the release says to whoever opens it. */
export function releaseText(
  batch: BatchRow,
  { number, options }: Pick<ReleaseRow, "number" | "options">,
  quality: ReleaseQuality,
): string {
  const percent = (value: number) => `${(value * 100).toFixed(1)} %`;
  return [
    `${batch.title}, release ${number}`,
    "",
    `${quality.images} images, ${quality.instances} instances, drawn by ${quality.annotators} annotators, ${batch.kMin} to ${batch.kMax} on each image.`,
    `Mean agreement ${percent(quality.agreement.mean)} (target ${percent(quality.agreement.target)}).`,
    `Expected panoptic quality ${quality.predictedQuality.value.toFixed(3)}, 95 % interval ${quality.predictedQuality.low.toFixed(3)} to ${quality.predictedQuality.high.toFixed(3)}.`,
    `${quality.decidedByAdmin} images were decided by an admin.`,
    "",
    options.coordinates === "upright"
      ? "Coordinates are pixels of the upright image (EXIF orientation applied)."
      : "Coordinates are pixels of the file as it was uploaded, before its EXIF orientation is applied; provenance.json states the orientation of each.",
    "Origin at the top left corner of the top left pixel, x right, y down.",
    ...(options.withPictures
      ? [
          "The folder pictures/ holds the upright pictures, converted to PNG or JPEG and free of camera and place data.",
        ]
      : []),
    "Regions follow the even-odd rule. Image files are matched by name and by SHA-256 of the file as uploaded.",
    options.licence === ""
      ? "Licence of the labels: none is stated; ask the team that published them."
      : `Licence of the labels, as stated by the team that published them: ${options.licence} (https://spdx.org/licenses/${options.licence}).`,
    "",
    ...(batch.safetyCritical
      ? [
          "CAUTION: these labels feed a safety-critical system. Have them reviewed by people qualified in that field before use.",
          "",
        ]
      : []),
    "Agreement between annotators is not proof of correctness.",
    "",
  ].join("\n");
}
