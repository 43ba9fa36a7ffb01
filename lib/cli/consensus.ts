import path from "node:path";
import { mergeImage } from "@/lib/consensus/mergeImage";
import { ReliabilityBatch } from "@/lib/consensus/reliability";
import {
  CONSENSUS_METHODS,
  DEFAULT_SETTINGS,
  type AnnotatorLabels,
  type ConsensusSettings,
  type ImageConsensus,
  type ImageLabels,
  type LabelledInstance,
  type Reliability,
} from "@/lib/consensus/types";
import { openCoco, type CocoFile } from "@/lib/formats/cocoFile";
import {
  FormatError,
  type DatasetAnnotation,
  type DatasetClass,
  type DatasetImage,
  type DatasetSource,
} from "@/lib/formats/dataset";
import { writeDataset } from "@/lib/formats/formats";
import { maskFromRle, type LabelShape } from "@/lib/geometry/rle";
import { traceMask } from "@/lib/geometry/trace";
import type { Shape } from "@/lib/geometry/types";
import { inFile, InputError, progressLine, runCommand, writeFileWhole } from "./cli";

type Annotator = {
  id: string;
  file: string;
  coco: CocoFile;
  imageIdOf: Map<string, number>;
  nameOf: Map<number, string>;
};

function methodOf(value: string | undefined): ConsensusSettings["method"] {
  if (value === undefined) return DEFAULT_SETTINGS.method;
  const found = CONSENSUS_METHODS.find((method) => method === value.toLowerCase());
  if (!found)
    throw new InputError(`--method is ${JSON.stringify(value)}, not one of ${CONSENSUS_METHODS.join(", ")}`);
  return found;
}

function shareOf(value: string | undefined, option: string, otherwise: number): number {
  if (value === undefined) return otherwise;
  const share = Number(value);
  if (value.trim() === "" || !(share >= 0 && share <= 1)) {
    throw new InputError(`${option} is ${JSON.stringify(value)}, not a number from 0 to 1`);
  }
  return share;
}

function openAll(files: readonly string[]): Annotator[] {
  const seen = new Set<string>();
  return files.map((file) => {
    const place = path.resolve(file);
    if (seen.has(place)) throw new InputError(`${file}: is given twice`);
    seen.add(place);
    const progress = progressLine(path.basename(file));
    const coco = inFile(file, () => openCoco(file, { onProgress: progress.step }));
    progress.done();
    const base = path.basename(file, path.extname(file));
    const isUnique = files.filter((other) => path.basename(other, path.extname(other)) === base).length === 1;
    return {
      id: isUnique ? base : file,
      file,
      coco,
      imageIdOf: new Map(coco.images.map(({ id, fileName }) => [fileName, id])),
      nameOf: new Map(coco.classes.map(({ id, name }) => [id, name])),
    };
  });
}

/** All images by file name; their sizes must be the same in every file. Ids stay where they do not clash. */
function imagesOf(annotators: readonly Annotator[]): DatasetImage[] {
  const byName = new Map<string, DatasetImage>();
  for (const { coco, file } of annotators) {
    for (const image of coco.images) {
      const known = byName.get(image.fileName);
      if (known && (known.width !== image.width || known.height !== image.height)) {
        throw new InputError(
          `${file}: image ${image.fileName}: is ${image.width} x ${image.height} px here and ${known.width} x ${known.height} px in another file`,
        );
      }
      byName.set(image.fileName, known ?? image);
    }
  }
  const images = [...byName.values()];
  return withFreeIds(images).sort((a, b) => a.id - b.id);
}

function classesOf(annotators: readonly Annotator[]): DatasetClass[] {
  const byName = new Map<string, DatasetClass>();
  for (const { coco } of annotators) {
    for (const one of coco.classes) if (!byName.has(one.name)) byName.set(one.name, one);
  }
  return withFreeIds([...byName.values()]).sort((a, b) => a.id - b.id);
}

/** Keeps the first of each id and gives the others the next ones that are free. */
function withFreeIds<T extends { readonly id: number }>(list: readonly T[]): T[] {
  const used = new Set<number>();
  const clashing = new Set<T>();
  for (const one of list) {
    if (used.has(one.id)) clashing.add(one);
    used.add(one.id);
  }
  let free = 1;
  return list.map((one) => {
    if (!clashing.has(one)) return one;
    while (used.has(free)) free++;
    used.add(free);
    return { ...one, id: free };
  });
}

function labelsOf(image: DatasetImage, annotators: readonly Annotator[]): ImageLabels {
  const labels: AnnotatorLabels[] = [];
  for (const { id, file, coco, imageIdOf, nameOf } of annotators) {
    const imageId = imageIdOf.get(image.fileName);
    if (imageId === undefined) continue;
    const instances = inFile(file, () =>
      coco.annotationsOf(imageId).map((annotation) => instanceOf(annotation, nameOf)),
    );
    labels.push({ annotatorId: id, instances });
  }
  return { width: image.width, height: image.height, annotators: labels };
}

function instanceOf(annotation: DatasetAnnotation, nameOf: ReadonlyMap<number, string>): LabelledInstance {
  const { id, classId, shape, crowd, occluded, truncated } = annotation;
  const name = nameOf.get(classId);
  if (name === undefined) throw new FormatError(`annotation ${id}`, `category_id ${classId} is not listed`);
  return {
    id: String(id),
    classId: name,
    shape: regionOf(shape),
    crowd,
    ...(occluded === undefined ? {} : { occluded }),
    ...(truncated === undefined ? {} : { truncated }),
  };
}

function regionOf(shape: LabelShape): Shape {
  return shape.kind === "mask" ? { kind: "polygon", rings: traceMask(maskFromRle(shape.rle)) } : shape;
}

/** Merges each image when the writer asks for it, once, so that only one is in memory. */
function mergedSource(
  images: readonly DatasetImage[],
  classes: readonly DatasetClass[],
  merge: (image: DatasetImage) => ImageConsensus,
): DatasetSource {
  const byId = new Map(images.map((image) => [image.id, image]));
  const classIdOf = new Map(classes.map(({ id, name }) => [name, id]));
  let nextId = 1;
  return {
    images,
    classes,
    annotationsOf: (imageId) => {
      const image = byId.get(imageId);
      if (!image) return [];
      return merge(image).agreed.map(
        ({ classId, shape, box, score, support, spread, crowd }): DatasetAnnotation => ({
          id: nextId++,
          imageId,
          classId: classIdOf.get(classId) ?? 0,
          shape,
          crowd,
          box,
          score: rounded(score),
          support,
          spread: rounded(spread),
        }),
      );
    },
  };
}

function rounded(value: number): number {
  return Math.round(value * 1e6) / 1e6;
}

/** What the report says, gathered image by image. */
class Summary {
  private readonly images: object[] = [];
  private readonly verdicts = { settled: 0, short: 0, split: 0 };
  private readonly people = new Map<
    string,
    { found: number; missed: number; spurious: number; qualities: number[]; ious: number[] }
  >();
  private agreed = 0;
  private leftOut = 0;
  private agreement = 0;
  private quality = 0;

  constructor(
    private readonly annotators: readonly Annotator[],
    private readonly reliability: Reliability,
  ) {}

  add({ fileName }: DatasetImage, result: ImageConsensus): void {
    this.verdicts[result.verdict]++;
    this.agreed += result.agreed.length;
    this.leftOut += result.leftOut.length;
    this.agreement += result.agreement;
    this.quality += result.predictedQuality.value;
    for (const { annotatorId, found, missed, spurious, quality, meanIou } of result.scores) {
      const person = this.people.get(annotatorId) ?? {
        found: 0,
        missed: 0,
        spurious: 0,
        qualities: [],
        ious: [],
      };
      this.people.set(annotatorId, person);
      person.found += found;
      person.missed += missed;
      person.spurious += spurious;
      person.qualities.push(quality);
      if (meanIou !== null) person.ious.push(meanIou);
    }
    this.images.push({
      file_name: fileName,
      annotators: result.scores.length,
      agreed: result.agreed.length,
      left_out: result.leftOut.map(({ annotatorId, instanceId, reason, why }) => ({
        annotator: annotatorId,
        annotation: Number(instanceId),
        reason,
        why,
      })),
      agreement: rounded(result.agreement),
      predicted_quality: roundedEstimate(result.predictedQuality),
      verdict: result.verdict,
      reason: result.reason,
      annotator_quality: Object.fromEntries(
        result.scores.map(({ annotatorId, quality }) => [annotatorId, rounded(quality)]),
      ),
    });
  }

  toReport(): object {
    const count = Math.max(1, this.images.length);
    return {
      overall: {
        images: this.images.length,
        agreed: this.agreed,
        left_out: this.leftOut,
        ...this.verdicts,
        mean_agreement: rounded(this.agreement / count),
        mean_predicted_quality: rounded(this.quality / count),
        converged: this.reliability.converged,
        copies: this.reliability.copies,
      },
      annotators: this.annotators.map(({ id, file }) => {
        const known = this.reliability.annotators[id];
        const person = this.people.get(id);
        return {
          annotator: id,
          file,
          images: known?.images ?? 0,
          instances: known?.instances ?? 0,
          quality: person ? mean(person.qualities) : null,
          mean_iou: person ? mean(person.ious) : null,
          found: person?.found ?? 0,
          missed: person?.missed ?? 0,
          spurious: person?.spurious ?? 0,
          detection: known ? roundedEstimate(known.detection) : null,
          false_alarm: known ? roundedEstimate(known.falseAlarm) : null,
          copy_of: known?.copyOf ?? null,
          classes: [...this.reliability.classIds, "(nothing)"],
          confusion: known?.confusion.map((row) => row.map(rounded)) ?? [],
        };
      }),
      images: this.images,
    };
  }
}

function roundedEstimate({ value, low, high }: { value: number; low: number; high: number }): object {
  return { value: rounded(value), low: rounded(low), high: rounded(high) };
}

function mean(values: readonly number[]): number | null {
  return values.length === 0 ? null : rounded(values.reduce((sum, value) => sum + value, 0) / values.length);
}

// Last, because it runs at once and needs the classes above.
void runCommand(
  {
    name: "consensus",
    summary: "Merges several annotators' COCO files into one agreed COCO file.",
    options: {
      in: {
        value: "FILE",
        required: true,
        multiple: true,
        help: "COCO file of one annotator; give one --in for each",
      },
      out: { value: "FILE", required: true, help: "COCO file for the agreed labels" },
      report: { value: "FILE", help: "JSON file for the quality of annotators and images" },
      method: { value: "NAME", help: `${CONSENSUS_METHODS.join(", ")} (default ${DEFAULT_SETTINGS.method})` },
      cut: {
        value: "IOU",
        help: `least similarity that joins two labels (default ${DEFAULT_SETTINGS.iouCut})`,
      },
      target: {
        value: "SHARE",
        help: `agreement at which an image is settled (default ${DEFAULT_SETTINGS.agreementTarget})`,
      },
    },
    notes: [
      "Images are matched by file_name and classes by name. An annotator's file lists the images that the person has seen:",
      "an image listed without annotations was seen and found empty. Every agreed annotation carries support (how many",
      "people), spread (how far their outlines differ, 0..1) and score (probability that the object is real).",
      "Agreement is no proof: labels that safety depends on need review by people qualified in that field.",
    ],
  },
  ({ in: inputs, out, report, method, cut, target }) => {
    const settings: ConsensusSettings = {
      ...DEFAULT_SETTINGS,
      method: methodOf(method),
      iouCut: shareOf(cut, "--cut", DEFAULT_SETTINGS.iouCut),
      agreementTarget: shareOf(target, "--target", DEFAULT_SETTINGS.agreementTarget),
      kMax: Math.max(DEFAULT_SETTINGS.kMin, inputs.length),
    };
    const annotators = openAll(inputs);
    const images = imagesOf(annotators);
    const classes = classesOf(annotators);
    const batch = new ReliabilityBatch(settings);
    const reading = progressLine("comparing");
    images.forEach((image, k) => {
      batch.put(image.fileName, labelsOf(image, annotators));
      reading.step(k + 1, images.length);
    });
    reading.done();
    const reliability = batch.estimate();
    const summary = new Summary(annotators, reliability);
    const merging = progressLine("merging");
    let merged = 0;
    const source = mergedSource(images, classes, (image) => {
      const result = mergeImage(labelsOf(image, annotators), settings, reliability);
      summary.add(image, result);
      merging.step(++merged, images.length);
      return result;
    });
    const written = writeDataset("coco", source);
    if (written.kind === "file") writeFileWhole(out, written.text);
    merging.done();
    if (report !== undefined) writeFileWhole(report, [`${JSON.stringify(summary.toReport(), null, 2)}\n`]);
    for (const { coco } of annotators) coco.close();
  },
);
