import { boxFromPoints, boxOfRings, ringOfBox } from "@/lib/geometry/box";
import { convexHull } from "@/lib/geometry/hull";
import { signedRingArea } from "@/lib/geometry/ring";
import { simplifyRings } from "@/lib/geometry/simplify";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import { closedOutline } from "./closing";
import { nearZero, randomFrom, type Random } from "./random";
import { CLOUD, tap } from "./texture";
import type { SceneInstance } from "./truth";

/** How somebody draws: with care, at a steady pace, in haste, with boxes where outlines are asked, or without care. */
export type Care = "careful" | "steady" | "hasty" | "boxy" | "careless";

type Habit = {
  /** Typical distance of an outline from what it follows, px, in stretches; and of single clicks. */
  wanderPx: number;
  clickPx: number;
  /** How far outside of the edge the hand stays on the whole, px. */
  outsidePx: number;
  /** Loss of IoU that the few clicks of an outline bring. */
  coarseness: number;
  /** Patience: an outline of more clicks than this is drawn coarser. */
  clicksMax: number;
  /** Gaps up to this width are drawn over, as when a blade of weed lies across, px. */
  bridgePx: number;
  drawsHoles: boolean;
  drawsBoxes: number;
  miss: number;
  wrongClass: number;
  /** Chance to take two neighbours of a class for one. */
  merge: number;
  /** Expected number of things drawn that are none. */
  invent: number;
};

const HABITS: Record<Care, Habit> = {
  careful: {
    wanderPx: 0.7,
    clickPx: 0.4,
    outsidePx: 0.3,
    coarseness: 0.025,
    clicksMax: 110,
    bridgePx: 2,
    drawsHoles: true,
    drawsBoxes: 0,
    miss: 0.012,
    wrongClass: 0.004,
    merge: 0.01,
    invent: 0.02,
  },
  steady: {
    wanderPx: 1.3,
    clickPx: 0.7,
    outsidePx: 0.6,
    coarseness: 0.04,
    clicksMax: 70,
    bridgePx: 3,
    drawsHoles: true,
    drawsBoxes: 0,
    miss: 0.035,
    wrongClass: 0.015,
    merge: 0.03,
    invent: 0.05,
  },
  hasty: {
    wanderPx: 2.4,
    clickPx: 1.3,
    outsidePx: 1.4,
    coarseness: 0.06,
    clicksMax: 36,
    bridgePx: 7,
    drawsHoles: false,
    drawsBoxes: 0.04,
    miss: 0.09,
    wrongClass: 0.035,
    merge: 0.1,
    invent: 0.12,
  },
  boxy: {
    wanderPx: 1.5,
    clickPx: 1,
    outsidePx: 1.2,
    coarseness: 0.05,
    clicksMax: 36,
    bridgePx: 8,
    drawsHoles: false,
    drawsBoxes: 0.85,
    miss: 0.06,
    wrongClass: 0.02,
    merge: 0.06,
    invent: 0.06,
  },
  careless: {
    wanderPx: 5,
    clickPx: 2.6,
    outsidePx: 2.5,
    coarseness: 0.12,
    clicksMax: 18,
    bridgePx: 9,
    drawsHoles: false,
    drawsBoxes: 0.12,
    miss: 0.22,
    wrongClass: 0.11,
    merge: 0.2,
    invent: 0.5,
  },
};

/** Share of an outline's area from which a further part or a hole is worth drawing: the eye of a coil is, a slit is not. */
const PART_MIN_SHARE = 0.08;
const HOLE_MIN_SHARE = 0.02;
const HOLE_MIN_PX2 = 60;

export type Drawn = Pick<SceneInstance, "className" | "box" | "rings" | "occluded">;

export type Truth = { width: number; height: number; instances: readonly SceneInstance[] };

/** What somebody of this care would draw of a scene. The same seed gives the same drawing. Coordinates to 0.1 px. */
export function annotate(truth: Truth, care: Care, seed: number): Drawn[] {
  const habit = HABITS[care];
  const random = randomFrom(Math.imul(seed, 0x9e3779b1) + care.length * 7919);
  const names = [...new Set(truth.instances.map(({ className }) => className))];
  const seen = merged(truth.instances, habit, random);
  const drawn = seen.flatMap((instance): Drawn[] => {
    if (random() < missChance(instance, habit)) return [];
    const className =
      random() < habit.wrongClass
        ? (names[Math.floor(random() * names.length)] ?? instance.className)
        : instance.className;
    const rings =
      random() < habit.drawsBoxes
        ? [looseBox(instance.box, habit, random)]
        : outlined(instance.rings, truth, habit, random);
    const inside = rings
      .map((ring) => ring.map((point) => within(point, truth)))
      .filter((ring) => Math.abs(signedRingArea(ring)) >= 12);
    return inside.length === 0
      ? []
      : [
          {
            className,
            box: boxOfRings(inside),
            rings: inside,
            occluded: instance.occluded !== random() < habit.wrongClass * 2,
          },
        ];
  });
  const inventions = Math.floor(habit.invent) + (random() < habit.invent % 1 ? 1 : 0);
  for (let i = 0; i < inventions; i++) {
    const ring = pebbleLike(truth, random);
    drawn.push({
      className: names[Math.floor(random() * names.length)] ?? "object",
      box: boxOfRings([ring]),
      rings: [ring],
      occluded: false,
    });
  }
  return drawn;
}

/** Small things and mostly hidden ones are missed more. */
function missChance({ box, visibleFraction }: SceneInstance, { miss }: Habit): number {
  const small = Math.min(1, 700 / Math.max(1, box[2] * box[3]));
  return Math.min(0.9, miss * (0.7 + 2.2 * small + 2 * Math.max(0, 0.6 - visibleFraction)));
}

/** Some neighbours of one class, taken for one object. */
function merged(instances: readonly SceneInstance[], { merge }: Habit, random: Random): SceneInstance[] {
  const left = [...instances];
  const out: SceneInstance[] = [];
  for (let first = left.shift(); first; first = left.shift()) {
    const { className, box } = first;
    const other = left.findIndex(
      (candidate) => candidate.className === className && gapPx(candidate.box, box) < 6,
    );
    if (other < 0 || random() >= merge) {
      out.push(first);
      continue;
    }
    const [second] = left.splice(other, 1);
    const hull = convexHull([...first.rings, ...(second?.rings ?? [])].flat());
    out.push({ ...first, rings: [hull], box: boxFromPoints(hull) });
  }
  return out;
}

function gapPx([ax, ay, aw, ah]: Box, [bx, by, bw, bh]: Box): number {
  return Math.max(ax - bx - bw, bx - ax - aw, ay - by - bh, by - ay - ah);
}

function outlined(rings: Rings, truth: Truth, habit: Habit, random: Random): Ring[] {
  const closed = closedOutline(rings, habit.bridgePx, truth);
  const largest = Math.max(0, ...closed.map((ring) => Math.abs(signedRingArea(ring))));
  const worth = closed.filter((ring) => {
    const area = signedRingArea(ring);
    if (area > 0) return area >= PART_MIN_SHARE * largest;
    return habit.drawsHoles && -area >= Math.max(HOLE_MIN_PX2, HOLE_MIN_SHARE * largest);
  });
  let simple = simplifyRings(worth, habit.coarseness);
  for (let loss = habit.coarseness * 1.5; loss < 0.3; loss *= 1.5) {
    if (simple.reduce((clicks, ring) => clicks + ring.length, 0) <= habit.clicksMax) break;
    simple = simplifyRings(worth, loss);
  }
  return simple.map((ring) => wandered(ring, habit, random));
}

/** Moves each vertex along its own normal by an amount that changes slowly: a hand is off by stretches, not by points. */
function wandered(ring: Ring, { wanderPx, clickPx, outsidePx }: Habit, random: Random): Ring {
  const outward = signedRingArea(ring) > 0 ? 1 : -1;
  const shift = random() * 512;
  let along = 0;
  return ring.map(([x, y], index): Point => {
    const [px, py] = ring[(index + ring.length - 1) % ring.length] ?? [x, y];
    const [qx, qy] = ring[(index + 1) % ring.length] ?? [x, y];
    along += Math.hypot(x - px, y - py);
    const length = Math.hypot(qx - px, qy - py) || 1;
    const off = outward * (outsidePx + 2 * wanderPx * tap(CLOUD, along * 0.25 + shift, shift));
    return [
      x + ((qy - py) / length) * off + nearZero(random) * 1.7 * clickPx,
      y - ((qx - px) / length) * off + nearZero(random) * 1.7 * clickPx,
    ];
  });
}

function looseBox([x, y, width, height]: Box, { outsidePx, clickPx, wanderPx }: Habit, random: Random): Ring {
  const slip = () => outsidePx + nearZero(random) * (clickPx + wanderPx) * 1.5;
  const [left, top] = [x - slip(), y - slip()];
  return ringOfBox([
    left,
    top,
    Math.max(3, x + width + slip() - left),
    Math.max(3, y + height + slip() - top),
  ]);
}

/** A roundish outline somewhere: a pebble or a knot of weed taken for litter. */
function pebbleLike({ width, height }: Truth, random: Random): Ring {
  const radius = 9 + random() * 26;
  const [x, y] = [
    radius * 1.4 + random() * (width - 2.8 * radius),
    radius * 1.4 + random() * (height - 2.8 * radius),
  ];
  const count = 6 + Math.floor(random() * 5);
  return Array.from({ length: count }, (_, i): Point => {
    const angle = (i / count) * 2 * Math.PI;
    const r = radius * (0.75 + 0.5 * random());
    return within([x + Math.cos(angle) * r, y + Math.sin(angle) * r * 0.8], { width, height });
  });
}

function within([x, y]: Point, { width, height }: { width: number; height: number }): Point {
  const tenths = (value: number, most: number) => Math.round(Math.min(most, Math.max(0, value)) * 10) / 10;
  return [tenths(x, width), tenths(y, height)];
}
