import type { Box, Rings } from "@/lib/geometry/types";
import { decodeFile } from "@/lib/vision/decode";
import type { EverydayLabel } from "@/lib/proposals/everydayLabels";
import { everydayDetector } from "@/lib/proposals/everydayFiles";
import type { ImportedPrediction } from "@/lib/formats/importedResults";
import { propose, type Everyday, type Proposal } from "@/lib/proposals/propose";
import { trainExemplars, type ExemplarModel } from "@/lib/proposals/exemplar";
import { recallAmongFirst } from "@/lib/proposals/recall";

export type Proposed = { box: Box; rings: Rings; score: number; classId: string | null; source: string };

export type ProposeTask = {
  kind: "propose";
  bytes: Uint8Array;
  limit: number;
  model: ExemplarModel | null;
  /** Labels of the detector of everyday things with the class that each stands for; empty: it is not used. */
  known: [EverydayLabel, string][];
  /** Whether the key has no class that the detector does not know. */
  isAllKnown: boolean;
  /** Calibrated predictions of the requester's own model, px of the original. */
  imported: ImportedPrediction[];
};

export type TrainTask = {
  kind: "train";
  images: { bytes: Uint8Array; instances: { classId: string; box: Box; rings?: Rings }[] }[];
  known: [EverydayLabel, string][];
};

export type Trained = {
  model: ExemplarModel;
  /** Recall with twice as many proposals as objects, of the classes that the detector knows; null where it knows none. */
  recall: { with: number; without: number } | null;
};

/** Longest side at which the engines look at a picture, px; they report in pixels of the original. */
const SIDE_MAX_PX = 1600;
/** Pictures on which the detector is measured: more change little and each takes a second. */
const MEASURED_MAX = 8;

/** What runs on a thread: everything that decodes pictures or searches them. */
export default async function run(task: ProposeTask | TrainTask): Promise<Proposed[] | Trained> {
  return task.kind === "propose" ? findProposals(task) : train(task);
}

async function findProposals(task: ProposeTask): Promise<Proposed[]> {
  const { raster, scale } = await decodeFile(Buffer.from(task.bytes), { maxSide: SIDE_MAX_PX });
  const everyday = task.known.length > 0 ? await everydayOf(task.known, task.isAllKnown) : undefined;
  const also = task.imported.map(({ box, rings, classId, score }): Proposal => ({
    box: scaledBox(box, scale),
    rings: scaledRings(rings, scale),
    classId,
    score,
    source: "import",
  }));
  return propose(raster, {
    limit: task.limit,
    scale,
    also,
    ...(task.model && { model: task.model }),
    ...(everyday && { everyday }),
  });
}

async function everydayOf(known: readonly [EverydayLabel, string][], isAll: boolean): Promise<Everyday> {
  return { detector: await everydayDetector(), classOf: new Map(known), isAll };
}

async function train(task: TrainTask): Promise<Trained> {
  const images = [];
  for (const { bytes, instances } of task.images) {
    const { raster, scale } = await decodeFile(Buffer.from(bytes), { maxSide: SIDE_MAX_PX });
    images.push({
      raster,
      instances: instances.map(({ classId, box, rings }) => ({
        classId,
        box: scaledBox(box, scale),
        ...(rings && { rings: scaledRings(rings, scale) }),
      })),
    });
  }
  const model = trainExemplars(images);
  if (task.known.length === 0) return { model, recall: null };
  const everyday = await everydayOf(task.known, false);
  const classIds = new Set(task.known.map(([, classId]) => classId));
  const measured = images
    .map(({ raster, instances }) => ({
      raster,
      objects: instances.filter(({ classId }) => classIds.has(classId)).map(({ box }) => box),
    }))
    .filter(({ objects }) => objects.length > 0)
    .slice(-MEASURED_MAX);
  if (measured.length === 0) return { model, recall: null };
  const recallOf = (use: Everyday | undefined) =>
    recallAmongFirst(
      measured.map(({ raster, objects }) => ({
        objects,
        found: propose(raster, {
          limit: objects.length * 2,
          isTraced: false,
          ...(use && { everyday: use }),
        }).map(({ box }) => box),
      })),
    );
  return { model, recall: { with: recallOf(everyday), without: recallOf(undefined) } };
}

const scaledBox = ([x, y, w, h]: Box, scale: number): Box => [x * scale, y * scale, w * scale, h * scale];
const scaledRings = (rings: Rings, scale: number): Rings =>
  rings.map((ring) => ring.map(([x, y]) => [x * scale, y * scale] as const));
