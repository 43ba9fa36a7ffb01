import { boxIou, spansOf } from "@/lib/consensus/spans";
import { ringArea } from "@/lib/consensus/contour";
import type { AnnotatorLabels, ImageLabels, LabelledInstance } from "@/lib/consensus/types";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import { Random } from "./random";
import { combine, meet } from "./regions";
import type { Scene, TrueObject } from "./scenes";

export type Kind =
  | "careful"
  | "sloppy"
  | "missesSmall"
  | "merges"
  | "splits"
  | "wrongClass"
  | "boxesOnly"
  | "copies"
  | "spams";

/** How many of each kind are in a pool of 30. */
export type Mix = Record<Kind, number>;

export const POOLS = {
  usual: {
    careful: 8,
    sloppy: 6,
    missesSmall: 3,
    merges: 3,
    splits: 2,
    wrongClass: 2,
    boxesOnly: 2,
    copies: 2,
    spams: 2,
  },
  hard: {
    careful: 5,
    sloppy: 5,
    missesSmall: 3,
    merges: 4,
    splits: 2,
    wrongClass: 2,
    boxesOnly: 2,
    copies: 3,
    spams: 4,
  },
  hostile: {
    careful: 5,
    sloppy: 4,
    missesSmall: 2,
    merges: 2,
    splits: 1,
    wrongClass: 2,
    boxesOnly: 1,
    copies: 7,
    spams: 6,
  },
} satisfies Record<string, Mix>;

export type Person = {
  id: string;
  kind: Kind;
  /** Amplitude of smooth error along the outline, as a share of the object's size. */
  wobble: number;
  /** Error of each click, px. */
  click: number;
  /** Habitual offset outwards, as a share of the object's size. */
  offset: number;
  miss: number;
  missSmall: number;
  wrongClass: number;
  /** False objects an image. */
  invents: number;
};

export function poolOf(mix: Mix, random: Random, noise = 1): Person[] {
  const people: Person[] = [];
  for (const [kind, count] of Object.entries(mix) as [Kind, number][]) {
    for (let k = 0; k < count; k++) people.push(personOf(kind, `${kind}-${k}`, random, noise));
  }
  // Ids that do not tell the kind by their order.
  return random
    .shuffled(people)
    .map((person, k) => ({ ...person, id: `p${String(k).padStart(2, "0")}-${person.kind}` }));
}

function personOf(kind: Kind, id: string, random: Random, noise: number): Person {
  const skill = random.between(0.8, 1.25) * noise;
  const person: Person = {
    id,
    kind,
    wobble: 0.035 * skill,
    click: 0.7 * skill,
    offset: 0.01 * random.normal() * noise,
    miss: 0.03,
    missSmall: 0.06,
    wrongClass: 0.03,
    invents: 0.15,
  };
  switch (kind) {
    case "sloppy":
      return {
        ...person,
        wobble: 0.11 * skill,
        click: 1.6 * skill,
        offset: 0.05 * random.normal() * noise,
        miss: 0.08,
        missSmall: 0.2,
        wrongClass: 0.06,
        invents: 0.4,
      };
    case "missesSmall":
      return { ...person, missSmall: 0.75 };
    case "wrongClass":
      return { ...person, wrongClass: 0.35 };
    case "boxesOnly":
      return { ...person, wobble: 0.03 * skill };
    case "spams":
      return { ...person, invents: 7 };
    default:
      return person;
  }
}

/** Objects smaller than this share of the image are the ones that some people overlook. */
const SMALL_SHARE = 0.004;

/** One image labelled by the people given. Copiers hand in somebody's drawings of the image, hardly touched. */
export function labelScene(scene: Scene, people: readonly Person[], random: Random): ImageLabels {
  const classes = [...new Set(scene.objects.map(({ classId }) => classId))].sort();
  const honest = people.filter(({ kind }) => kind !== "copies");
  const done = new Map<string, AnnotatorLabels>();
  for (const person of honest) done.set(person.id, labelledBy(scene, person, classes, random));
  for (const person of people) {
    if (person.kind !== "copies") continue;
    const source = honest.length > 0 ? done.get(random.pick(honest).id)! : undefined;
    done.set(
      person.id,
      source
        ? { annotatorId: person.id, instances: source.instances.map((instance) => nudged(instance, random)) }
        : labelledBy(
            scene,
            { ...person, wobble: 0.11, click: 1.6, miss: 0.1, missSmall: 0.3, invents: 0.5 },
            classes,
            random,
          ),
    );
  }
  return { width: scene.width, height: scene.height, annotators: people.map(({ id }) => done.get(id)!) };
}

function nudged(instance: LabelledInstance, random: Random): LabelledInstance {
  const shift = (): number => 0.15 * random.normal();
  const { shape } = instance;
  if (shape.kind === "box") {
    const [x, y, width, height] = shape.box;
    return { ...instance, shape: { kind: "box", box: [x + shift(), y + shift(), width, height] } };
  }
  const [dx, dy] = [shift(), shift()];
  const rings = shape.rings.map((ring) => ring.map(([x, y]): Point => [x + dx, y + dy]));
  return { ...instance, shape: { kind: "polygon", rings } };
}

function labelledBy(
  scene: Scene,
  person: Person,
  classes: readonly string[],
  random: Random,
): AnnotatorLabels {
  const instances: LabelledInstance[] = [];
  const add = (classId: string, rings: Rings) => {
    const drawn = clipToImage(rings, scene);
    if (drawn.length === 0) return;
    const id = `${person.id}-${instances.length}`;
    if (person.kind === "boxesOnly") {
      const box = spansOf({ kind: "polygon", rings: drawn }).box;
      instances.push({ id, classId, shape: { kind: "box", box } });
    } else instances.push({ id, classId, shape: { kind: "polygon", rings: drawn } });
  };
  const classFor = (classId: string) => {
    if (classes.length < 2 || !random.chance(person.wrongClass)) return classId;
    // People confuse a class mostly with the same other one.
    const other = classes[(classes.indexOf(classId) + 1) % classes.length]!;
    return random.chance(0.7) ? other : random.pick(classes.filter((id) => id !== classId));
  };
  if (person.kind !== "spams") {
    const used = new Set<number>();
    scene.objects.forEach((object, k) => {
      if (used.has(k)) return;
      used.add(k);
      const small = object.areaPx2 < SMALL_SHARE * scene.width * scene.height;
      if (random.chance(small ? person.missSmall : person.miss)) return;
      let rings = object.rings;
      if (person.kind === "merges") {
        const near = scene.objects.findIndex(
          (other, j) => j !== k && !used.has(j) && other.classId === object.classId && touch(object, other),
        );
        if (near >= 0 && random.chance(0.6)) {
          used.add(near);
          rings = joined(object.rings, scene.objects[near]!.rings);
        }
      }
      const classId = classFor(object.classId);
      if (person.kind === "splits" && object.areaPx2 > 400 && random.chance(0.35)) {
        for (const half of halves(rings, random)) add(classId, redrawn(half, person, random));
      } else add(classId, redrawn(rings, person, random));
    });
  }
  const false_ = random.poisson(person.invents);
  for (let k = 0; k < false_; k++) {
    const size = Math.exp(random.between(Math.log(10), Math.log(60)));
    const x = random.between(size, scene.width - size);
    const y = random.between(size, scene.height - size);
    const ring = Array.from({ length: 12 }, (_, i): Point => {
      const angle = (2 * Math.PI * i) / 12;
      const radius = size * random.between(0.7, 1.2);
      return [x + radius * Math.cos(angle), y + radius * Math.sin(angle)];
    });
    add(random.pick(classes), [ring]);
  }
  return { annotatorId: person.id, instances };
}

function touch(a: TrueObject, b: TrueObject): boolean {
  const grown = (object: TrueObject): Box => {
    const [x, y, width, height] = spansOf({ kind: "polygon", rings: object.rings }).box;
    return [x - 3, y - 3, width + 6, height + 6];
  };
  if (boxIou(grown(a), grown(b)) === 0) return false;
  return meet(a.rings, b.rings);
}

/** Both regions as one drawing, closed across a gap of up to 3 px. */
function joined(a: Rings, b: Rings): Rings {
  return combine([a], [b], "closed");
}

function halves(rings: Rings, random: Random): Rings[] {
  const [x, y, width, height] = spansOf({ kind: "polygon", rings }).box;
  const cut = random.between(0.35, 0.65);
  const rectangle = (fromX: number, fromY: number, toX: number, toY: number): Ring => [
    [fromX, fromY],
    [toX, fromY],
    [toX, toY],
    [fromX, toY],
  ];
  const [endX, endY] = [x + width, y + height];
  const sides =
    width > height
      ? [rectangle(x, y, x + cut * width, endY), rectangle(x + cut * width, y, endX, endY)]
      : [rectangle(x, y, endX, y + cut * height), rectangle(x, y + cut * height, endX, endY)];
  return sides.map((side) => combine([rings], [[side]], "common"));
}

/** What a hand makes of an outline: fewer vertices, a smooth error along it, an error at each click, a habit. */
export function redrawn(rings: Rings, person: Person, random: Random): Rings {
  return rings
    .filter((ring) => ring.length >= 3 && Math.abs(ringArea(ring)) > 8)
    .map((ring) => redrawnRing(ring, person, random));
}

function redrawnRing(ring: Ring, person: Person, random: Random): Ring {
  const size = Math.sqrt(Math.abs(ringArea(ring)));
  const lengths = ring.map(([x, y], i) => {
    const [u, v] = ring[(i + 1) % ring.length]!;
    return Math.hypot(u - x, v - y);
  });
  const perimeter = lengths.reduce((sum, length) => sum + length, 0);
  const count = Math.max(6, Math.min(60, Math.round(perimeter / Math.max(4, person.wobble * size * 1.5))));
  const waves = [1, 2, 3, 4, 5, 6].map((k) => ({
    k,
    amplitude: (person.wobble * size * random.normal()) / Math.sqrt(k),
    phase: random.between(0, 2 * Math.PI),
  }));
  const sign = ringArea(ring) > 0 ? 1 : -1;
  const [shiftX, shiftY] = [
    0.4 * person.wobble * size * random.normal(),
    0.4 * person.wobble * size * random.normal(),
  ];
  const points: Point[] = [];
  let edge = 0;
  let passed = 0;
  for (let i = 0; i < count; i++) {
    const target = (perimeter * i) / count;
    while (edge < ring.length - 1 && passed + lengths[edge]! < target) passed += lengths[edge++]!;
    const [x, y] = ring[edge]!;
    const [u, v] = ring[(edge + 1) % ring.length]!;
    const length = Math.max(1e-9, lengths[edge]!);
    const t = (target - passed) / length;
    const normal = [(sign * (v - y)) / length, (-sign * (u - x)) / length];
    const angle = (2 * Math.PI * i) / count;
    const away =
      person.offset * size +
      waves.reduce((sum, { k, amplitude, phase }) => sum + amplitude * Math.cos(k * angle + phase), 0);
    points.push([
      x + t * (u - x) + away * normal[0]! + shiftX + person.click * random.normal(),
      y + t * (v - y) + away * normal[1]! + shiftY + person.click * random.normal(),
    ]);
  }
  return points;
}

function clipToImage(rings: Rings, { width, height }: Scene): Rings {
  return rings
    .map((ring) =>
      ring.map(([x, y]): Point => [Math.min(width, Math.max(0, x)), Math.min(height, Math.max(0, y))]),
    )
    .filter((ring) => Math.abs(ringArea(ring)) > 4);
}
