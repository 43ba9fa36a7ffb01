import { readFileSync } from "node:fs";
import type { Point, Ring, Rings } from "@/lib/geometry/types";
import { ringArea } from "@/lib/consensus/contour";
import { combine } from "./regions";
import { Random } from "./random";

export type TrueObject = { classId: string; rings: Rings; areaPx2: number };
export type Scene = { width: number; height: number; objects: TrueObject[] };

export function areaOf(rings: Rings): number {
  return Math.abs(rings.reduce((sum, ring) => sum + ringArea(ring), 0));
}

/** Shapes of five classes that touch and hide one another, some in tight groups. About 7.7 visible ones an image. */
export function syntheticScene(random: Random): Scene {
  const width = 480;
  const height = 360;
  const classes = ["bottle", "cap", "can", "float", "rope"];
  const drawn: { classId: string; rings: Rings }[] = [];
  const groups = 2 + random.below(3);
  for (let g = 0; g < groups; g++) {
    const classId = random.pick(classes);
    let x = random.between(50, width - 50);
    let y = random.between(50, height - 50);
    const count = 1 + random.below(4);
    const size = Math.exp(random.between(Math.log(12), Math.log(48)));
    for (let k = 0; k < count; k++) {
      drawn.push({
        classId: random.chance(0.8) ? classId : random.pick(classes),
        rings: [blob(random, x, y, size * random.between(0.8, 1.25))],
      });
      const turn = random.between(0, 2 * Math.PI);
      x = Math.min(width - 20, Math.max(20, x + Math.cos(turn) * size * random.between(1.3, 2.1)));
      y = Math.min(height - 20, Math.max(20, y + Math.sin(turn) * size * random.between(1.3, 2.1)));
    }
  }
  const lone = random.below(4);
  for (let k = 0; k < lone; k++) {
    const size = Math.exp(random.between(Math.log(8), Math.log(40)));
    drawn.push({
      classId: random.pick(classes),
      rings: [blob(random, random.between(30, width - 30), random.between(30, height - 30), size)],
    });
  }
  const objects: TrueObject[] = [];
  drawn.forEach(({ classId, rings }, k) => {
    const above = drawn.slice(k + 1).map((other) => other.rings);
    const whole = areaOf(rings);
    const visible = above.length > 0 ? combine([rings], above, "without") : [...rings];
    const kept = visible.filter((ring) => Math.abs(ringArea(ring)) > 20);
    const areaPx2 = areaOf(kept);
    if (areaPx2 > Math.max(100, 0.3 * whole)) objects.push({ classId, rings: kept, areaPx2 });
  });
  return { width, height, objects };
}

/** A closed curve about a centre: an ellipse with a few harmonics, or a rounded bar. */
function blob(random: Random, x: number, y: number, size: number): Ring {
  const stretch = Math.exp(random.between(-0.5, 0.5));
  const turn = random.between(0, Math.PI);
  const waves = [2, 3, 4, 5].map((k) => ({
    k,
    amplitude: (random.normal() * 0.16) / k,
    phase: random.between(0, 2 * Math.PI),
  }));
  const points = 48;
  return Array.from({ length: points }, (_, i): Point => {
    const angle = (2 * Math.PI * i) / points;
    const radius =
      size *
      (1 + waves.reduce((sum, { k, amplitude, phase }) => sum + amplitude * Math.cos(k * angle + phase), 0));
    const u = radius * Math.cos(angle) * stretch;
    const v = (radius * Math.sin(angle)) / stretch;
    return [
      Math.min(480, Math.max(0, x + u * Math.cos(turn) - v * Math.sin(turn))),
      Math.min(360, Math.max(0, y + u * Math.sin(turn) + v * Math.cos(turn))),
    ];
  });
}

type CocoFile = {
  images: { id: number; width: number; height: number }[];
  annotations: {
    image_id: number;
    category_id: number;
    iscrowd: number;
    area: number;
    segmentation: number[][] | object;
  }[];
};

/** The photographs' own outlines; regions of many objects and those under 60 px² are left out. */
export function realScenes(file: string): Scene[] {
  const coco: CocoFile = JSON.parse(readFileSync(file, "utf8"));
  return coco.images
    .map(({ id, width, height }): Scene => {
      const objects: TrueObject[] = [];
      for (const annotation of coco.annotations) {
        if (annotation.image_id !== id || annotation.iscrowd || !Array.isArray(annotation.segmentation))
          continue;
        const rings = annotation.segmentation.map((flat: number[]) =>
          Array.from({ length: flat.length / 2 }, (_, k): Point => [flat[2 * k]!, flat[2 * k + 1]!]),
        );
        const areaPx2 = areaOf(rings.map((ring: Ring) => (ringArea(ring) < 0 ? [...ring].reverse() : ring)));
        if (areaPx2 >= 60) objects.push({ classId: `c${annotation.category_id}`, rings, areaPx2 });
      }
      return { width, height, objects };
    })
    .filter(({ objects }) => objects.length > 0);
}
