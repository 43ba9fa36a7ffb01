import type { Box, Rings } from "@/lib/geometry/types";
import { decodeFile } from "@/lib/vision/decode";
import { propose } from "@/lib/proposals/propose";
import { trainExemplars, type ExemplarModel } from "@/lib/proposals/exemplar";

export type Proposed = { box: Box; rings: Rings; score: number; classId: string | null; source: string };

export type ProposeTask = { kind: "propose"; bytes: Uint8Array; limit: number; model: ExemplarModel | null };

export type TrainTask = {
  kind: "train";
  images: { bytes: Uint8Array; instances: { classId: string; box: Box; rings?: Rings }[] }[];
};

/** Longest side at which the engines look at a picture, px; they report in pixels of the original. */
const SIDE_MAX_PX = 1600;

/** What runs on a thread: everything that decodes pictures or searches them. */
export default async function run(task: ProposeTask | TrainTask): Promise<Proposed[] | ExemplarModel> {
  if (task.kind === "propose") {
    const { raster, scale } = await decodeFile(Buffer.from(task.bytes), { maxSide: SIDE_MAX_PX });
    return propose(raster, { limit: task.limit, scale, ...(task.model && { model: task.model }) });
  }
  const images = [];
  for (const { bytes, instances } of task.images) {
    const { raster, scale } = await decodeFile(Buffer.from(bytes), { maxSide: SIDE_MAX_PX });
    images.push({
      raster,
      instances: instances.map(({ classId, box, rings }) => ({
        classId,
        box: [box[0] * scale, box[1] * scale, box[2] * scale, box[3] * scale] as const,
        ...(rings && { rings: rings.map((ring) => ring.map(([x, y]) => [x * scale, y * scale] as const)) }),
      })),
    });
  }
  return trainExemplars(images);
}
