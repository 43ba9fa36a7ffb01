import { createHash } from "node:crypto";
import type { Reader } from "@/db/client";
import { findBrief, listClasses, type BatchRow } from "@/db/queries/batches";
import { listAnnotatorsOf, listCurrentRuns } from "@/db/queries/work";
import type { Dataset, DatasetAnnotation } from "@/lib/formats/dataset";

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
 * The settled labels of a batch as a dataset, with the quality they claim and where each came from.
 * Annotators appear by a pseudonym that differs from batch to batch. Same database, same result.
 */
export function releaseContents(db: Reader, batch: BatchRow) {
  const key = listClasses(db, batch.id);
  const numberOf = new Map(key.map((row) => [row.id, row.number]));
  const settled = listCurrentRuns(db, batch.id).filter(({ image }) => image.consensusState === "settled");
  const pseudonym = (annotatorId: string) =>
    `annotator-${createHash("sha256").update(`${batch.id}/${annotatorId}`).digest("hex").slice(0, 10)}`;
  const annotations: DatasetAnnotation[] = [];
  const images = settled.map(({ run, image }, index) => {
    for (const instance of run.result.agreed) {
      annotations.push({
        id: annotations.length + 1,
        imageId: index + 1,
        classId: numberOf.get(instance.classId) ?? 0,
        shape: instance.shape,
        crowd: instance.crowd,
        score: rounded(instance.score),
        support: instance.support,
        spread: rounded(instance.spread),
      });
    }
    return {
      id: index + 1,
      fileName: image.fileName,
      width: image.width ?? 0,
      height: image.height ?? 0,
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
    images: settled.map(({ run, image }) => ({
      fileName: image.fileName,
      sha256: image.sha256,
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
  return { dataset, quality, provenance };
}

/** What the release says to whoever opens it. */
export function releaseText(batch: BatchRow, number: number, quality: ReleaseQuality): string {
  const percent = (value: number) => `${(value * 100).toFixed(1)} %`;
  return [
    `${batch.title}, release ${number}`,
    "",
    `${quality.images} images, ${quality.instances} instances, drawn by ${quality.annotators} annotators, ${batch.kMin} to ${batch.kMax} on each image.`,
    `Mean agreement ${percent(quality.agreement.mean)} (target ${percent(quality.agreement.target)}).`,
    `Expected panoptic quality ${quality.predictedQuality.value.toFixed(3)}, 95 % interval ${quality.predictedQuality.low.toFixed(3)} to ${quality.predictedQuality.high.toFixed(3)}.`,
    `${quality.decidedByAdmin} images were decided by an admin.`,
    "",
    "Coordinates are pixels of the upright image, origin at the top left corner of the top left pixel, x right, y down.",
    "Regions follow the even-odd rule. Image files are matched by name and by SHA-256 of the file as uploaded.",
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
