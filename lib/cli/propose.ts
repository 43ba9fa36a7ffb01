import { readdirSync } from "node:fs";
import path from "node:path";
import { openCoco } from "@/lib/formats/cocoFile";
import { boxOf, type DatasetSource } from "@/lib/formats/dataset";
import type { Box, Rings } from "@/lib/geometry/types";
import { trainExemplars, type ExemplarImage, type ExemplarModel } from "@/lib/proposals/exemplar";
import { propose, type Proposal } from "@/lib/proposals/propose";
import { decodeFile, type Decoded } from "@/lib/vision/decode";
import { inFile, InputError, progressLine, runCommand, writeFileWhole } from "./cli";

const TOP_DEFAULT = 100;
const TOP_MAX = 5000;
/** The class of a proposal of which nothing but the place is known. */
const CLASS_UNKNOWN = 0;
const EXTENSIONS = /\.(jpe?g|png|webp|tiff?|gif|avif)$/i;
/** Larger pictures are read at this side; the answer is in px of the original. */
const SIDE_MAX_PX = 8192;

void runCommand(
  {
    name: "propose",
    summary: "Proposals for every image of a folder as COCO results, best first.",
    options: {
      images: { value: "DIR", required: true, help: "folder of images; folders in it are read as well" },
      out: { value: "FILE", required: true, help: "where the COCO results go" },
      exemplars: { value: "COCO.json", help: "agreed labels of some of these images, matched by file_name" },
      top: { value: "N", help: `proposals an image (${TOP_DEFAULT})` },
    },
    notes: [
      "With exemplars, a detector is learned from them and used where it wins on images that it has not seen; images then",
      "take the ids of that file. category_id is 0 where the class is not known, score the probability that a person keeps",
      "the proposal.",
    ],
  },
  async ({ images: folder, out, exemplars, top }) => {
    const limit = top === undefined ? TOP_DEFAULT : Number(top);
    if (!Number.isInteger(limit) || limit < 1 || limit > TOP_MAX) {
      throw new InputError(`--top is ${JSON.stringify(top)}, not a whole number from 1 to ${TOP_MAX}`);
    }
    const names = inFile(folder, () => imageNames(folder));
    if (names.length === 0) throw new InputError(`${folder}: no image in this folder`);
    const labels = exemplars === undefined ? undefined : inFile(exemplars, () => openCoco(exemplars));
    const model =
      labels && exemplars !== undefined ? await learn(folder, names, labels, exemplars) : undefined;
    const ids = new Map(labels?.images.map(({ fileName, id }) => [fileName, id]));
    let nextId = Math.max(0, ...ids.values()) + 1;
    const results: string[] = [];
    const progress = progressLine("proposing");
    for (const [index, name] of names.entries()) {
      const { raster, scale } = await decode(path.join(folder, name));
      const found = propose(raster, { limit, scale, ...(model?.useful && { model }) });
      const imageId = ids.get(name) ?? nextId++;
      for (const proposal of found) results.push(JSON.stringify(toResult(proposal, imageId, name, labels)));
      progress.step(index + 1, names.length);
    }
    progress.done();
    writeFileWhole(out, ["[\n", results.join(",\n"), "\n]\n"]);
    process.stderr.write(
      `${results.length} proposals for ${names.length} images${model ? `; ${gainOf(model)}` : ""}\n`,
    );
  },
);

/** Names relative to the folder with "/" between folders, in order. */
function imageNames(folder: string): string[] {
  return readdirSync(folder, { recursive: true, withFileTypes: true })
    .filter((entry) => entry.isFile() && EXTENSIONS.test(entry.name))
    .map((entry) => path.relative(folder, path.join(entry.parentPath, entry.name)).split(path.sep).join("/"))
    .sort();
}

async function decode(file: string): Promise<Decoded> {
  try {
    return await decodeFile(file, { maxSide: SIDE_MAX_PX });
  } catch (cause) {
    throw new InputError(`${file}: ${cause instanceof Error ? cause.message : "is no image"}`, { cause });
  }
}

async function learn(
  folder: string,
  names: readonly string[],
  labels: DatasetSource,
  file: string,
): Promise<ExemplarModel> {
  const present = new Set(names);
  const images: ExemplarImage[] = [];
  for (const { id, fileName } of labels.images) {
    if (!present.has(fileName)) continue;
    const { raster, scale } = await decode(path.join(folder, fileName));
    const instances = labels.annotationsOf(id).map((annotation) => {
      const [x, y, w, h] = boxOf(annotation);
      return {
        classId: String(annotation.classId),
        box: [x * scale, y * scale, w * scale, h * scale] as Box,
      };
    });
    images.push({ raster, instances });
  }
  if (images.length === 0)
    throw new InputError(`${file}: lists no image of ${folder}; file names must match`);
  return trainExemplars(images);
}

function gainOf({ useful, apWith, apWithout }: ExemplarModel): string {
  if (apWith === null || apWithout === null)
    return "too few exemplars to measure a gain, so they were not used";
  const figures = `AP at IoU 0.5 on held-out exemplars ${apWith.toFixed(3)} against ${apWithout.toFixed(3)} without`;
  return useful ? `learned from exemplars: ${figures}` : `exemplars not used: ${figures}`;
}

function toResult(
  { box, rings, score, classId }: Proposal,
  imageId: number,
  fileName: string,
  labels: DatasetSource | undefined,
): object {
  const only = labels?.classes.length === 1 ? labels.classes[0]?.id : undefined;
  return {
    image_id: imageId,
    file_name: fileName,
    category_id: classId === null ? (only ?? CLASS_UNKNOWN) : Number(classId),
    bbox: box.map(hundredths),
    segmentation: (rings as Rings).map((ring) => ring.flatMap(([x, y]) => [hundredths(x), hundredths(y)])),
    score: Number(score.toFixed(5)),
  };
}

const hundredths = (value: number) => Math.round(value * 100) / 100;
