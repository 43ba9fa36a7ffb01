import { existsSync, readFileSync } from "node:fs";
import path from "node:path";
import { boxIou } from "@/lib/geometry/box";
import { maskArea, rasteriseRings } from "@/lib/geometry/mask";
import type { Box, Point } from "@/lib/geometry/types";
import { candidates, WORK_SIDE_PX } from "@/lib/proposals/candidates";
import type { LearningPicture } from "@/lib/proposals/objectnessLearning";
import { decodeFile } from "@/lib/vision/decode";
import type { OutlineExample } from "@/lib/vision/outlineLearning";
import { shrinkRaster, type Raster } from "@/lib/vision/raster";

export const PHOTOGRAPHS = path.resolve("../shared/data/coco-by");
export const FOLDS = 5;
export const COUNTS = [10, 30, 50, 100, 1000] as const;
/** "Over 32² px" is by the area of the object, as COCO has it. */
const LARGE_PX2 = 1024;

export type Annotation = {
  id: number;
  image_id: number;
  category_id: number;
  bbox: [number, number, number, number];
  area: number;
  iscrowd: number;
  segmentation: number[][] | object;
};
export type Coco = {
  images: { id: number; file_name: string; width: number; height: number; coco_url: string }[];
  annotations: Annotation[];
  categories: { id: number; name: string }[];
};

export function readCoco(folder: string): Coco {
  const file = path.join(folder, "instances.json");
  if (!existsSync(file)) {
    console.log(`skipped: ${path.basename(folder)} is not beside the project (../shared/data)`);
    process.exit(0);
  }
  return JSON.parse(readFileSync(file, "utf8")) as Coco;
}

/** Each photograph with its objects (crowds left out), px of the raster. */
export async function readPhotographs(): Promise<{ raster: Raster; objects: Annotation[] }[]> {
  const coco = readCoco(PHOTOGRAPHS);
  const found = [];
  for (const { id, file_name } of coco.images) {
    const { raster } = await decodeFile(path.join(PHOTOGRAPHS, "images", file_name));
    found.push({ raster, objects: coco.annotations.filter((a) => a.image_id === id && a.iscrowd === 0) });
  }
  return found;
}

export async function readLearningPictures(): Promise<{ pictures: LearningPicture[]; cpuSeconds: number }> {
  const photographs = await readPhotographs();
  let cpuSeconds = 0;
  const pictures = photographs.map(({ raster, objects }): LearningPicture => {
    const start = process.cpuUsage();
    const small = shrinkRaster(raster, WORK_SIDE_PX);
    const { count, boxes, features } = candidates(small);
    const used = process.cpuUsage(start);
    cpuSeconds += (used.user + used.system) / 1e6;
    const sx = small.width / raster.width;
    const sy = small.height / raster.height;
    const truth = objects.map(({ bbox: [x, y, w, h], area }) => ({
      box: [x * sx, y * sy, w * sx, h * sy] as Box,
      isLarge: area > LARGE_PX2,
    }));
    return { set: { count, boxes, features }, truth };
  });
  return { pictures, cpuSeconds: cpuSeconds / pictures.length };
}

export type Recalls = {
  objects: number;
  large: number;
  rows: { count: number; at50: number; at70: number; large50: number; best: number }[];
};

/** Pooled over all objects: how many are met by one of the first n boxes. */
export function recallsOf(
  pictures: readonly Pick<LearningPicture, "truth">[],
  ranked: readonly { boxes: readonly Box[] }[],
): Recalls {
  const rows = COUNTS.map((count) => ({ count, at50: 0, at70: 0, large50: 0, best: 0 }));
  let objects = 0;
  let large = 0;
  pictures.forEach(({ truth }, n) => {
    for (const { box, isLarge } of truth) {
      objects++;
      if (isLarge) large++;
      let best = 0;
      let seen = 0;
      for (const row of rows) {
        for (; seen < Math.min(row.count, ranked[n]!.boxes.length); seen++)
          best = Math.max(best, boxIou(ranked[n]!.boxes[seen]!, box));
        row.best += best;
        if (best >= 0.5) row.at50++;
        if (best >= 0.5 && isLarge) row.large50++;
        if (best >= 0.7) row.at70++;
      }
    }
  });
  for (const row of rows) {
    row.at50 /= objects;
    row.at70 /= objects;
    row.best /= objects;
    row.large50 /= large;
  }
  return { objects, large, rows };
}

export function printRecalls(name: string, { objects, large, rows }: Recalls): void {
  const line = (label: string, of: (row: Recalls["rows"][number]) => number) =>
    console.log(`  ${label.padEnd(22)} ${rows.map((row) => of(row).toFixed(3).padStart(6)).join(" ")}`);
  console.log(`${name} (${objects} objects, ${large} over 32² px)`);
  console.log(`  ${"proposals".padEnd(22)} ${rows.map((row) => String(row.count).padStart(6)).join(" ")}`);
  line("recall at IoU 0.5", (row) => row.at50);
  line("  over 32² px", (row) => row.large50);
  line("recall at IoU 0.7", (row) => row.at70);
  line("average best overlap", (row) => row.best);
}

/** The objects over 32² px whose outline is given as polygons, with their masks. */
export async function readOutlineExamples(): Promise<OutlineExample[]> {
  const photographs = await readPhotographs();
  return photographs.flatMap(({ raster, objects }, group) =>
    objects.flatMap(({ bbox, area, segmentation }): OutlineExample[] => {
      if (area <= LARGE_PX2 || !Array.isArray(segmentation)) return [];
      const rings = segmentation.map((flat) =>
        Array.from({ length: flat.length >> 1 }, (_, n): Point => [flat[2 * n] ?? 0, flat[2 * n + 1] ?? 0]),
      );
      const mask = rasteriseRings(rings, raster.width, raster.height);
      return maskArea(mask) > 0 ? [{ raster, box: bbox, mask, group }] : [];
    }),
  );
}
