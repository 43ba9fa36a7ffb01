import { boxOfRings } from "@/lib/geometry/box";
import { ringsArea } from "@/lib/geometry/region";
import { simplifyRings } from "@/lib/geometry/simplify";
import type { Point, Ring } from "@/lib/geometry/types";
import type { SceneInstance } from "./index";
import { noise, randomFrom } from "./noise";

type SceneTruth = { width: number; height: number; instances: readonly SceneInstance[] };

/** How carefully somebody draws. */
export type Care = "careful" | "steady" | "hasty" | "careless";

type Habit = {
  /** Typical distance of an outline from the truth, px. */
  wanderPx: number;
  /** Loss of IoU that the few clicks of an outline bring. */
  coarseness: number;
  /** Chance to miss an object, more for small ones. */
  miss: number;
  wrongClass: number;
  /** Chance to draw something that is none. */
  invent: number;
};

const HABITS: Record<Care, Habit> = {
  careful: { wanderPx: 1.2, coarseness: 0.02, miss: 0.015, wrongClass: 0.005, invent: 0.02 },
  steady: { wanderPx: 2.2, coarseness: 0.035, miss: 0.04, wrongClass: 0.02, invent: 0.06 },
  hasty: { wanderPx: 3.6, coarseness: 0.06, miss: 0.1, wrongClass: 0.04, invent: 0.12 },
  careless: { wanderPx: 6.5, coarseness: 0.12, miss: 0.24, wrongClass: 0.12, invent: 0.4 },
};

export type Drawn = Pick<SceneInstance, "className" | "box" | "rings" | "occluded">;

/** What somebody of this care would draw of a scene. The same seed gives the same drawing. */
export function annotate(scene: SceneTruth, care: Care, seed: number): Drawn[] {
  const habit = HABITS[care];
  const random = randomFrom(seed * 2654435761 + 11);
  const names = [...new Set(scene.instances.map((instance) => instance.className))];
  const drawn = scene.instances.flatMap((instance, index): Drawn[] => {
    const small = Math.min(1, 900 / Math.max(1, instance.box[2] * instance.box[3]));
    if (random() < habit.miss * (1 + 2 * small + (instance.visibleFraction < 0.5 ? 1.5 : 0))) return [];
    const className =
      random() < habit.wrongClass
        ? (names[Math.floor(random() * names.length)] ?? instance.className)
        : instance.className;
    // A person outlines the largest parts, without holes and crumbs.
    const parts = instance.rings.filter(
      (ring) => ringsArea([ring]) > 0.12 * ringsArea([instance.rings[0] ?? ring]),
    );
    const rings = simplifyRings(parts, habit.coarseness)
      .map((ring, part) => wander(ring, habit.wanderPx, seed * 131 + index * 17 + part, scene))
      .filter((ring) => ring.length >= 3 && ringsArea([ring]) >= 16);
    if (rings.length === 0) return [];
    return [{ className, box: boxOfRings(rings), rings, occluded: instance.occluded }];
  });
  if (random() < habit.invent) {
    const [x, y, size] = [random() * (scene.width - 90), random() * (scene.height - 90), 24 + random() * 50];
    const ring: Ring = Array.from({ length: 8 }, (_, n): Point => [
      x + 45 + size * Math.cos((n / 8) * 6.28),
      y + 45 + size * Math.sin((n / 8) * 6.28),
    ]).map((point) => within(point, scene));
    if (names[0])
      drawn.push({ className: names[0], box: boxOfRings([ring]), rings: [ring], occluded: false });
  }
  return drawn;
}

/** Moves each vertex along its own normal by a smooth amount: a hand is off by stretches, not by points. */
function wander(ring: Ring, byPx: number, seed: number, scene: SceneTruth): Ring {
  const n = ring.length;
  return ring.map(([x, y], index): Point => {
    const [px, py] = ring[(index + n - 1) % n] ?? [x, y];
    const [qx, qy] = ring[(index + 1) % n] ?? [x, y];
    const length = Math.hypot(qx - px, qy - py) || 1;
    const off = (noise(index * 0.6, seed * 0.37, seed) - 0.45) * 2.4 * byPx;
    const jitter = (noise(index * 7.3, 5, seed) - 0.5) * byPx;
    return within([x + (-(qy - py) / length) * off + jitter, y + ((qx - px) / length) * off + jitter], scene);
  });
}

function within([x, y]: Point, { width, height }: SceneTruth): Point {
  const round = (value: number) => Math.round(value * 10) / 10;
  return [round(Math.min(width, Math.max(0, x))), round(Math.min(height, Math.max(0, y)))];
}
