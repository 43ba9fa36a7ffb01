import type { AnnotatorLabels, ImageLabels, LabelledInstance } from "@/lib/consensus/types";
import type { Point, Rings } from "@/lib/geometry/types";
import { addCoverage, gridFor } from "@/lib/consensus/field";
import { unionBox } from "@/lib/consensus/fuse";
import { spansOf } from "@/lib/consensus/spans";
import { poolOf, POOLS, redrawn, type Person } from "./crowd";
import { Random } from "./random";
import type { Scene, TrueObject } from "./scenes";

/** One object, and what each of several people made of its outline when asked for just this object. */
export type OutlineTask = { object: TrueObject; labels: ImageLabels };

/**
 * The published setting of crowd outlines: people are shown an object and draw it. Same pool as elsewhere, so there are
 * boxes, halves, copies and spam among the drawings; nobody overlooks the object. `noise` scales every error.
 */
export function outlineTasks(
  scenes: readonly Scene[],
  seed: number,
  people: number,
  noise: number,
): OutlineTask[] {
  const random = new Random(seed * 104_729);
  const pool = poolOf(POOLS.usual, random, noise);
  const tasks: OutlineTask[] = [];
  for (const scene of scenes) {
    for (const object of scene.objects) {
      if (object.areaPx2 < 1024) continue;
      const chosen = random.shuffled(pool).slice(0, people);
      const done: AnnotatorLabels[] = [];
      for (const person of chosen.filter(({ kind }) => kind !== "copies")) {
        done.push({ annotatorId: person.id, instances: [drawing(object, person, scene, random)] });
      }
      for (const person of chosen.filter(({ kind }) => kind === "copies")) {
        const source = done.length > 0 ? random.pick(done) : undefined;
        const instances = source
          ? source.instances
          : [drawing(object, { ...person, kind: "sloppy" }, scene, random)];
        done.push({ annotatorId: person.id, instances });
      }
      tasks.push({ object, labels: { width: scene.width, height: scene.height, annotators: done } });
    }
  }
  return tasks;
}

function drawing(object: TrueObject, person: Person, scene: Scene, random: Random): LabelledInstance {
  let rings: Rings = redrawn(object.rings, person, random);
  if (person.kind === "boxesOnly") {
    const [x, y, width, height] = spansOf({ kind: "polygon", rings }).box;
    rings = [
      [
        [x, y],
        [x + width, y],
        [x + width, y + height],
        [x, y + height],
      ],
    ];
  } else if (person.kind === "spams") {
    const size = Math.sqrt(object.areaPx2);
    const [x, y] = [random.between(0, scene.width), random.between(0, scene.height)];
    rings = [
      Array.from({ length: 8 }, (_, i): Point => [
        x + size * Math.cos((Math.PI * i) / 4),
        y + size * Math.sin((Math.PI * i) / 4),
      ]),
    ];
  } else if (person.kind === "splits" && random.chance(0.35)) {
    const [x, , width] = spansOf({ kind: "polygon", rings }).box;
    rings = rings.map((ring) => ring.map(([px, py]): Point => [Math.min(px, x + width / 2), py]));
  }
  return { id: "drawn", classId: "object", shape: { kind: "polygon", rings } };
}

/** IoU with the truth of the plain pixel majority of the first `people` drawings. */
export function majorityIou({ object, labels }: OutlineTask, people: number): number {
  const drawings = labels.annotators.slice(0, people).map(({ instances }) => spansOf(instances[0]!.shape));
  const truth = spansOf({ kind: "polygon", rings: object.rings });
  const all = [truth, ...drawings];
  const grid = gridFor(
    unionBox(all.map(({ box }) => box)),
    Math.max(...all.map(({ stepPx }) => stepPx)),
    512,
  );
  const votes = new Float32Array(grid.columns * grid.rows);
  for (const spans of drawings) {
    const own = new Float32Array(votes.length);
    addCoverage(grid, spans, own);
    own.forEach((value, k) => (votes[k]! += Number(value >= 0.5) / drawings.length));
  }
  const real = new Float32Array(votes.length);
  addCoverage(grid, truth, real);
  let common = 0;
  let either = 0;
  votes.forEach((share, k) => {
    const [a, b] = [share > 0.5, real[k]! >= 0.5];
    common += Number(a && b);
    either += Number(a || b);
  });
  return common / Math.max(1, either);
}

/** Every so many tasks are looked at while the noise is tuned. */
const TUNING_STRIDE = 5;

/** The noise at which the majority of `people` has a mean IoU of `goal` over all seeds, by bisection. */
export function tuneNoise(
  scenes: readonly Scene[],
  seeds: readonly number[],
  people: number,
  goal: number,
): number {
  let [low, high] = [1, 2.5];
  for (let step = 0; step < 8; step++) {
    const middle = (low + high) / 2;
    const tasks = seeds
      .flatMap((seed) => outlineTasks(scenes, seed, people, middle))
      .filter((_, k) => k % TUNING_STRIDE === 0);
    const mean = tasks.reduce((sum, task) => sum + majorityIou(task, people), 0) / tasks.length;
    if (mean > goal) low = middle;
    else high = middle;
  }
  return (low + high) / 2;
}
