import path from "node:path";
import type { ImageLabels } from "@/lib/consensus/types";
import { labelScene, poolOf, POOLS, type Mix, type Person } from "./crowd";
import { Random } from "./random";
import { realScenes, syntheticScene, type Scene } from "./scenes";

export type Batch = { scenes: Scene[]; labels: ImageLabels[]; people: Person[] };
export type SceneKind = "synthetic" | "hard" | "real";

export const REAL_FILE = path.resolve(import.meta.dirname, "../../../../shared/data/coco-by/instances.json");

let real: Scene[] | undefined;

/** A batch of one kind: scenes, a pool of 30 and who labelled what, all from one seed. */
export function batchOf(
  kind: SceneKind,
  seed: number,
  annotators: number,
  options: { images?: number; mix?: Mix; noise?: number } = {},
): Batch {
  const { images = 60, mix = kind === "hard" ? POOLS.hard : POOLS.usual, noise = 1 } = options;
  const random = new Random(seed * 7919 + { synthetic: 1, hard: 2, real: 3 }[kind]);
  real ??= realScenes(REAL_FILE);
  const scenes =
    kind === "real"
      ? random.shuffled(real).slice(0, images)
      : Array.from({ length: images }, () => syntheticScene(random));
  const people = poolOf(mix, random, noise);
  const labels = scenes.map((scene) =>
    labelScene(scene, random.shuffled(people).slice(0, annotators), random),
  );
  return { scenes, labels, people };
}
