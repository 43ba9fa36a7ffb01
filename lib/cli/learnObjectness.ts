import { readFileSync, writeFileSync } from "node:fs";
import path from "node:path";
import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";
import { boxOfRegion, candidates, objectness, shrink, WORK_SIDE_PX } from "@/lib/proposals/candidates";
import { fitLogistic, type Example } from "@/lib/proposals/logistic";
import { suppress } from "@/lib/proposals/suppress";
import { decodeFile } from "@/lib/vision/decode";

/**
 * Learns the weights of the class-agnostic ranking from 51 photographs of COCO 2017 under CC BY and CC BY-SA
 * (attribution beside the pictures), prints what cross-validation says of them, and writes them down.
 */
const FOLDER = path.resolve(process.cwd(), "../shared/data/coco-by");
const COUNTS = [10, 30, 50, 100, 1000];
const FOLDS = 5;

type Coco = {
  images: { id: number; file_name: string }[];
  annotations: { image_id: number; bbox: [number, number, number, number]; iscrowd: number }[];
};

async function main(): Promise<void> {
  const coco = JSON.parse(readFileSync(path.join(FOLDER, "instances.json"), "utf8")) as Coco;
  const images: {
    found: ReturnType<typeof candidates>;
    boxes: Box[];
    best: number[];
    truth: { box: Box; isLarge: boolean }[];
  }[] = [];
  let millis = 0;
  for (const { id, file_name } of coco.images) {
    const { raster } = await decodeFile(path.join(FOLDER, "images", path.basename(file_name)));
    const start = performance.now();
    const small = shrink(raster, WORK_SIDE_PX);
    const scale = small.width / raster.width;
    const found = candidates(small);
    millis += performance.now() - start;
    const truth = coco.annotations
      .filter((annotation) => annotation.image_id === id && !annotation.iscrowd)
      .map(({ bbox }) => ({
        box: bbox.map((value) => value * scale) as unknown as Box,
        isLarge: bbox[2] * bbox[3] > 1024,
      }));
    const boxes = found.map(({ region }) => boxOfRegion(region));
    const best = boxes.map((box) => truth.reduce((most, entry) => Math.max(most, boxIou(box, entry.box)), 0));
    images.push({ found, boxes, best, truth });
  }
  const examplesOf = (list: typeof images): Example[] =>
    list.flatMap(({ found, best }) =>
      found.map(({ features }, index) => ({
        features,
        positive: (best[index] ?? 0) >= 0.5,
        weight: (best[index] ?? 0) >= 0.5 ? 3 : 1,
      })),
    );
  const recall = new Map(COUNTS.map((count) => [count, { all: 0, large: 0 }]));
  let all = 0;
  let large = 0;
  images.forEach((image, index) => {
    all += image.truth.length;
    large += image.truth.filter((entry) => entry.isLarge).length;
    void index;
  });
  for (let fold = 0; fold < FOLDS; fold++) {
    const weights = fitLogistic(examplesOf(images.filter((_, index) => index % FOLDS !== fold)), 1);
    images.forEach((image, index) => {
      if (index % FOLDS !== fold) return;
      const scores = image.found.map(({ features }) => objectness(features, weights));
      const kept = suppress(image.boxes, scores, 0.6, 1000);
      for (const count of COUNTS) {
        const shown = kept.slice(0, count);
        for (const entry of image.truth) {
          if (!shown.some((at) => boxIou(image.boxes[at] ?? entry.box, entry.box) >= 0.5)) continue;
          const tally = recall.get(count);
          if (tally) {
            tally.all += 1;
            tally.large += entry.isLarge ? 1 : 0;
          }
        }
      }
    });
  }
  console.log(
    `${images.length} photographs, ${all} objects (${large} over 32 x 32 px), ${Math.round(millis / images.length)} ms a photograph; recall at IoU 0.5, cross-validated:`,
  );
  for (const [count, tally] of recall)
    console.log(
      `  ${String(count).padStart(5)}  ${(tally.all / all).toFixed(3)}  large ${(tally.large / large).toFixed(3)}`,
    );
  const weights = fitLogistic(examplesOf(images), 1).map((value) => Number(value.toFixed(4)));
  writeFileSync(
    path.resolve(process.cwd(), "lib/proposals/weights/objectness.ts"),
    `/** Logistic weights of regionFeatures, learned by \`npm run -s learn:objectness\`; see that command for the data. */\nexport const OBJECTNESS: readonly number[] = ${JSON.stringify(weights)};\n`,
  );
}

main().catch((error: unknown) => {
  console.error(error);
  process.exit(1);
});
