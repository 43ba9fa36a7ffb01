import { openCoco } from "@/lib/formats/cocoFile";
import { areaOf, FormatError, type DatasetSource } from "@/lib/formats/dataset";
import { measureQuality } from "@/lib/quality/measure";
import type { JudgedImage, QualityReport } from "@/lib/quality/types";
import { inFile, InputError, progressLine, runCommand, writeFileWhole } from "./cli";

const ROUNDS_DEFAULT = 1000;

void runCommand(
  {
    name: "measure",
    summary: "Detection and segmentation quality of one COCO file against another, as JSON.",
    options: {
      truth: { value: "FILE", required: true, help: "COCO file that is taken as true" },
      labels: { value: "FILE", required: true, help: "COCO file, or COCO list of results, to be judged" },
      out: { value: "FILE", help: "where the report goes (standard output where absent)" },
      rounds: {
        value: "N",
        help: `rounds of the bootstrap for the intervals (${ROUNDS_DEFAULT}; 0 for none)`,
      },
    },
    notes: [
      "Images are matched by file_name, classes by name. Every image of the truth counts, whether the labels list it or not;",
      "images that only the labels list are left out and counted. PQ, SQ and RQ are means over classes and match over IoU",
      "0.5; the other figures pool all objects. AP is the COCO evaluation, on boxes and on pixels.",
    ],
  },
  ({ truth: truthPath, labels: labelsPath, out, rounds }) => {
    const bootstrapRounds = rounds === undefined ? ROUNDS_DEFAULT : Number(rounds);
    if (!Number.isInteger(bootstrapRounds) || bootstrapRounds < 0 || bootstrapRounds > 100_000) {
      throw new InputError(`--rounds is ${JSON.stringify(rounds)}, not a whole number from 0 to 100000`);
    }
    const reading = progressLine("reading");
    const truth = inFile(truthPath, () => openCoco(truthPath, { onProgress: reading.step }));
    const labels = inFile(labelsPath, () => openCoco(labelsPath, { base: truth, onProgress: reading.step }));
    reading.done();
    const joined = inFile(labelsPath, () => joinSources(truth, labels));
    const measuring = progressLine("measuring");
    const report = measureQuality(joined.images, { bootstrapRounds, onProgress: measuring.step });
    measuring.done();
    truth.close();
    labels.close();
    const text = `${JSON.stringify(toJson(report, joined), null, 2)}\n`;
    if (out === undefined) process.stdout.write(text);
    else writeFileWhole(out, [text]);
  },
);

type Joined = {
  readonly images: readonly JudgedImage[];
  readonly nameOfClass: ReadonlyMap<number, string>;
  readonly imagesWithoutLabels: number;
  readonly imagesLeftOut: number;
};

/** Both sides of each true image, with the labels' classes renumbered by name. */
function joinSources(truth: DatasetSource, labels: DatasetSource): Joined {
  const idOfName = new Map(truth.classes.map(({ id, name }) => [name, id]));
  const nameOfClass = new Map(truth.classes.map(({ id, name }) => [id, name]));
  let nextId = Math.max(0, ...truth.classes.map(({ id }) => id)) + 1;
  const renumbered = new Map<number, number>();
  for (const { id, name } of labels.classes) {
    const known = idOfName.get(name) ?? nextId++;
    renumbered.set(id, known);
    nameOfClass.set(known, name);
  }
  const labelled = new Map(labels.images.map((image) => [image.fileName, image]));
  let imagesWithoutLabels = 0;
  const images = truth.images.map((image): JudgedImage => {
    const { width, height } = image;
    const other = labelled.get(image.fileName);
    if (other && (other.width !== width || other.height !== height)) {
      throw new FormatError(
        `image ${image.fileName}`,
        `is ${other.width} x ${other.height} px here and ${width} x ${height} px in the truth`,
      );
    }
    if (!other) imagesWithoutLabels++;
    labelled.delete(image.fileName);
    return {
      width,
      height,
      truth: truth.annotationsOf(image.id).map((annotation) => ({
        classId: annotation.classId,
        shape: annotation.shape,
        isCrowd: annotation.crowd,
        areaPx2: areaOf(annotation),
      })),
      labels: (other ? labels.annotationsOf(other.id) : []).map(({ classId, shape, score }) => ({
        classId: renumbered.get(classId) ?? classId,
        shape,
        score: score ?? 1,
      })),
    };
  });
  return { images, nameOfClass, imagesWithoutLabels, imagesLeftOut: labelled.size };
}

/** Plain JSON: null where a figure does not exist, class names beside their numbers. */
function toJson(report: QualityReport, joined: Joined): unknown {
  const nameOf = (classId: number) => joined.nameOfClass.get(classId) ?? String(classId);
  const plain: unknown = {
    images: report.images,
    imagesWithoutLabels: joined.imagesWithoutLabels,
    imagesLeftOut: joined.imagesLeftOut,
    overall: report.overall,
    intervals95: report.intervals,
    ap: { box: report.ap.box.figures, mask: report.ap.mask.figures },
    perClass: report.perClass.map(({ classId, ...quality }) => ({
      class: nameOf(classId),
      ...quality,
      apBox: report.ap.box.perClass.find((entry) => entry.classId === classId)?.ap,
      apMask: report.ap.mask.perClass.find((entry) => entry.classId === classId)?.ap,
    })),
    perSize: report.perSize,
  };
  return JSON.parse(JSON.stringify(plain, (_, value: unknown) => (value === undefined ? null : value)));
}
