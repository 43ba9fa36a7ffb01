import type { Rgb } from "./light";
import type { Material } from "./film";
import type { Placed } from "./litter";
import { paint, srgb, stain, varied } from "./materials";
import { smoothCurve, tube, type Vec } from "./mesh";
import { between, nearZero, pick, wholeBetween, type Random } from "./random";
import { CLOUD, GRIT, tap } from "./texture";

const FIBRES: readonly [Rgb, ...Rgb[]] = [
  srgb(0x1f62b0),
  srgb(0x2b83c9),
  srgb(0xe4661c),
  srgb(0xe4661c),
  srgb(0x2c8f57),
  srgb(0x157a6c),
  srgb(0xd9c79a),
  srgb(0xe7e2d4),
  srgb(0xc23a34),
];

type RopePlace = { x: number; y: number; topAt: (x: number, y: number) => number };

/** A length of laid rope or a tangle of twine, in loose coils over whatever lies there. Parts are ready to draw. */
export function rope({ x, y, topAt }: RopePlace, random: Random): Placed[] {
  const isTwine = random() < 0.4;
  const colour = varied(pick(FIBRES, random), 0.12, random);
  const radius = isTwine ? between(random, 0.22, 0.34) : between(random, 0.5, 0.85);
  const path = coilPath(x, y, isTwine, random);
  const curve = draped(smoothCurve(path, isTwine ? 10 : 14), radius, topAt, random);
  const material = fibreMaterial(colour, random);
  const parts: Placed[] = [];
  const add = (points: Vec[], sides: number, r: number) =>
    parts.push({ mesh: tube(points, sides, () => r), material, isClear: false });
  if (isTwine) {
    add(curve, 6, radius);
    if (random() < 0.7)
      add(
        draped(
          smoothCurve(coilPath(x + nearZero(random) * 3, y + nearZero(random) * 3, true, random), 10),
          radius,
          topAt,
          random,
        ),
        6,
        radius,
      );
  } else {
    // Three strands laid round each other, as the rope is made.
    const dense = evenly(curve, radius * 0.42);
    for (let strand = 0; strand < 3; strand++)
      add(twisted(dense, radius, (strand / 3) * 2 * Math.PI), 7, radius * 0.58);
  }
  for (const [end, from] of [
    [curve.at(-1), curve.at(-4)],
    [curve[0], curve[3]],
  ] as const) {
    if (!end || !from || random() < 0.3) continue;
    const angle = Math.atan2(end[1] - from[1], end[0] - from[0]);
    const hairs = wholeBetween(random, 6, 11);
    for (let hair = 0; hair < hairs; hair++) {
      const bend = angle + nearZero(random) * 1.1;
      const length = between(random, 1.5, 4) * (isTwine ? 0.6 : 1);
      const points = [0, 1, 2].map((k): Vec => {
        const turn = bend + k * nearZero(random) * 0.3;
        const [hx, hy] = [
          end[0] + (Math.cos(turn) * k * length) / 2,
          end[1] + (Math.sin(turn) * k * length) / 2,
        ];
        return [hx, hy, topAt(hx, hy) + radius * (0.8 - 0.3 * k) + 0.1];
      });
      add(smoothCurve(points, 3), 4, 0.11);
    }
  }
  return parts;
}

/** Loops of changing size about a place, with a tail at each end; cm, z left at 0. */
function coilPath(x: number, y: number, isTwine: boolean, random: Random): Vec[] {
  const turns = isTwine
    ? between(random, 1.2, 3.4)
    : random() < 0.3
      ? between(random, 0.25, 0.6)
      : between(random, 0.9, 2.3);
  const size = isTwine ? between(random, 4, 9) : between(random, 6.5, 13);
  const count = Math.max(4, Math.ceil(turns * 7));
  const start = random() * 6.283;
  const squash = between(random, 0.5, 0.95);
  const lean = random() * 3.14;
  const sense = random() < 0.5 ? 1 : -1;
  const points: Vec[] = [];
  let [driftX, driftY] = [0, 0];
  for (let i = 0; i <= count; i++) {
    const angle = start + sense * (i / count) * turns * 2 * Math.PI;
    const r = size * (0.72 + 0.4 * random()) * (0.85 + (0.35 * i) / count);
    driftX += nearZero(random) * size * 0.14;
    driftY += nearZero(random) * size * 0.14;
    const [a, b] = [Math.cos(angle) * r, Math.sin(angle) * r * squash];
    points.push([
      x + driftX + a * Math.cos(lean) - b * Math.sin(lean),
      y + driftY + a * Math.sin(lean) + b * Math.cos(lean),
      0,
    ]);
  }
  const last = points.at(-1) ?? [x, y, 0];
  let heading = start + sense * turns * 2 * Math.PI + (sense * Math.PI) / 2 + lean;
  let [tx, ty] = [last[0], last[1]];
  const tail = wholeBetween(random, 1, isTwine ? 3 : 5);
  for (let i = 0; i < tail; i++) {
    heading += nearZero(random) * 0.9;
    tx += Math.cos(heading) * size * 0.55;
    ty += Math.sin(heading) * size * 0.55;
    points.push([tx, ty, 0]);
  }
  return points;
}

/** Lays a curve on what is below it, smoothed so that it bridges gaps, and crossing itself over and under. */
function draped(
  curve: readonly Vec[],
  radius: number,
  topAt: (x: number, y: number) => number,
  random: Random,
): Vec[] {
  const shift = random() * 512;
  const heights = curve.map(([x, y]) => topAt(x, y));
  return curve.map(([x, y], i) => {
    let [sum, count] = [0, 0];
    for (let k = Math.max(0, i - 4); k <= Math.min(heights.length - 1, i + 4); k++, count++)
      sum += heights[k]!;
    const z = Math.max(sum / count, heights[i]! - 0.3);
    return [x, y, z + radius * (0.75 + 0.7 * (1 + tap(CLOUD, i * 3.1 + shift, shift)))];
  });
}

/** The curve again with points `stepCm` apart. */
function evenly(curve: readonly Vec[], stepCm: number): Vec[] {
  const points: Vec[] = [];
  let carried = 0;
  for (let i = 1; i < curve.length; i++) {
    const [from, to] = [curve[i - 1]!, curve[i]!];
    const length = Math.hypot(to[0] - from[0], to[1] - from[1], to[2] - from[2]);
    while (carried < length) {
      const t = carried / length;
      points.push([
        from[0] + (to[0] - from[0]) * t,
        from[1] + (to[1] - from[1]) * t,
        from[2] + (to[2] - from[2]) * t,
      ]);
      carried += stepCm;
    }
    carried -= length;
  }
  return points.length >= 2 ? points : [...curve];
}

/** One strand of a laid rope: it goes round the rope's axis once in about seven radii. */
function twisted(curve: readonly Vec[], radius: number, phase: number): Vec[] {
  return curve.map(([x, y, z], i) => {
    const [bx, by] = curve[Math.max(0, i - 1)] ?? [x, y];
    const [ax, ay] = curve[Math.min(curve.length - 1, i + 1)] ?? [x, y];
    const length = Math.hypot(ax - bx, ay - by) || 1;
    const angle = phase + (i * 0.42 * 2 * Math.PI) / 6.5;
    const off = Math.cos(angle) * radius * 0.56;
    return [
      x - ((ay - by) / length) * off,
      y + ((ax - bx) / length) * off,
      z + Math.sin(angle) * radius * 0.56,
    ];
  });
}

function fibreMaterial(colour: Rgb, random: Random): Material {
  const shift = random() * 512;
  const age = between(random, 0.1, 0.5);
  return ({ x, y, u, v }, surface) => {
    paint(surface, colour);
    const fibre = tap(GRIT, v * 130 + u * 900, u * 260 + shift);
    const light = 1 + 0.28 * fibre;
    surface.r *= light;
    surface.g *= light;
    surface.b *= light;
    stain(surface, [0.2, 0.16, 0.11], Math.max(0, tap(CLOUD, x * 10 + shift, y * 10)) * age);
    surface.gloss = 0.14;
    surface.bumpZ = 0.15 * fibre;
  };
}
