import { mix, type Canvas, type Rgb, type Surface } from "./canvas";
import { fractal, noise, type Random } from "./noise";

export type Place = { x: number; y: number; angle: number; scale: number };

type Local = (u: number, v: number) => Surface | undefined;

/** Lays something that is described along its own axes (u along, v across, px at scale 1). */
function lay(
  canvas: Canvas,
  { x, y, angle, scale }: Place,
  reach: number,
  owner: number,
  local: Local,
): void {
  const [cos, sin] = [Math.cos(angle), Math.sin(angle)];
  const r = reach * scale;
  canvas.stamp([x - r, y - r, x + r, y + r], owner, (px, py) => {
    const u = ((px - x) * cos + (py - y) * sin) / scale;
    const v = (-(px - x) * sin + (py - y) * cos) / scale;
    const surface = local(u, v);
    if (!surface) return undefined;
    return {
      ...surface,
      height: surface.height * scale,
      nx: surface.nx * cos - surface.ny * sin,
      ny: surface.nx * sin + surface.ny * cos,
    };
  });
}

/** A body of revolution lying on its side: normals of a cylinder of this radius. */
function tube(v: number, radius: number): { ny: number; height: number } {
  const t = Math.max(-0.985, Math.min(0.985, v / radius));
  const z = Math.sqrt(1 - t * t);
  return { ny: t / z, height: radius * (1 + z) };
}

const step = (low: number, high: number, t: number) => {
  const s = Math.max(0, Math.min(1, (t - low) / (high - low)));
  return s * s * (3 - 2 * s);
};

const PLASTICS: readonly Rgb[] = [
  [0.62, 0.74, 0.78],
  [0.3, 0.52, 0.34],
  [0.2, 0.38, 0.58],
  [0.72, 0.7, 0.62],
];
const LABELS: readonly Rgb[] = [
  [0.75, 0.12, 0.1],
  [0.08, 0.25, 0.6],
  [0.9, 0.78, 0.15],
  [0.92, 0.92, 0.9],
];
const CAPS: readonly Rgb[] = [
  [0.85, 0.12, 0.1],
  [0.1, 0.3, 0.72],
  [0.92, 0.92, 0.92],
  [0.1, 0.5, 0.25],
  [0.95, 0.55, 0.08],
];
const ROPES: readonly Rgb[] = [
  [0.1, 0.36, 0.62],
  [0.9, 0.42, 0.1],
  [0.16, 0.5, 0.4],
  [0.75, 0.7, 0.55],
];
const FLOATS: readonly Rgb[] = [
  [0.93, 0.4, 0.08],
  [0.92, 0.75, 0.12],
  [0.9, 0.9, 0.86],
  [0.75, 0.12, 0.12],
];

const pick = <T>(list: readonly T[], random: Random): T =>
  list[Math.floor(random() * list.length)] ?? list[0]!;

/** A plastic bottle: base, body with ribs, a printed label, shoulder, neck and a cap of its own. */
export function bottle(canvas: Canvas, place: Place, owner: number, random: Random): void {
  const plastic = pick(PLASTICS, random);
  const label = pick(LABELS, random);
  const cap = pick(CAPS, random);
  const length = 120 + random() * 40;
  const radius = 19 + random() * 5;
  const hasLabel = random() < 0.75;
  const hasCap = random() < 0.8;
  const dent = 2 + random() * 4;
  const seed = Math.floor(random() * 1e6);
  const profile = (u: number): number => {
    const t = (u + length / 2) / length;
    if (t < 0 || t > 1) return 0;
    if (t < 0.05) return radius * (0.75 + 5 * t);
    if (t < 0.66)
      return (
        radius * (1 - 0.035 * Math.abs(Math.sin(u * 0.34))) -
        dent * step(0.55, 0.9, noise(u * 0.03, seed, seed))
      );
    if (t < 0.86) return radius * (1 - 0.6 * step(0.66, 0.86, t));
    return radius * (t > 0.91 && hasCap ? 0.46 : 0.38);
  };
  lay(canvas, place, length * 0.6, owner, (u, v) => {
    const r = profile(u);
    if (r <= 0 || Math.abs(v) > r) return undefined;
    const t = (u + length / 2) / length;
    const { ny, height } = tube(v, r);
    const slope = (profile(u - 1) - profile(u + 1)) / 2;
    const crease = (fractal(u * 0.08, v * 0.08, seed, 3) - 0.5) * 0.9;
    if (t > 0.91 && hasCap)
      return { height, nx: slope + 0.25 * Math.sin(v * 2.4), ny, colour: cap, gloss: 0.35 };
    if (hasLabel && t > 0.22 && t < 0.56) {
      const print = noise(u * 0.16 + 7, v * 0.3, seed) > 0.62 ? mix(label, [0.96, 0.95, 0.9], 0.85) : label;
      return { height, nx: slope + crease * 0.3, ny: ny * 0.95, colour: print, gloss: 0.2 };
    }
    const edge = Math.pow(Math.abs(v) / r, 3);
    return {
      height,
      nx: slope + crease,
      ny: ny + crease,
      colour: mix(plastic, [0.93, 0.96, 0.97], 0.25 + 0.2 * edge),
      gloss: 1,
      clear: 0.42 * (1 - edge),
    };
  });
}

/** A bottle cap: seen from above, or from below with its hollow. */
export function cap(canvas: Canvas, place: Place, owner: number, random: Random): void {
  const colour = pick(CAPS, random);
  const radius = 13 + random() * 3;
  const isOpen = random() < 0.4;
  lay(canvas, place, radius + 1, owner, (u, v) => {
    const d = Math.hypot(u, v);
    const angle = Math.atan2(v, u);
    const rim = radius * (1 + 0.02 * Math.sin(angle * 36));
    if (d > rim) return undefined;
    const [ru, rv] = [u / (d + 1e-6), v / (d + 1e-6)];
    if (d > radius * 0.82) {
      const rib = 0.6 * Math.sin(angle * 36);
      return { height: 8, nx: ru * 1.2 - rv * rib, ny: rv * 1.2 + ru * rib, colour, gloss: 0.3 };
    }
    if (isOpen)
      return {
        height: 2,
        nx: -ru * 0.5 * step(0.55, 0.82, d / radius),
        ny: -rv * 0.5 * step(0.55, 0.82, d / radius),
        colour: mix(colour, [0.1, 0.1, 0.1], 0.35),
        gloss: 0.1,
      };
    const ring = Math.abs(d / radius - 0.5) < 0.05 ? 0.5 : 0;
    return { height: 9, nx: ru * ring, ny: rv * ring, colour: mix(colour, [1, 1, 1], 0.05), gloss: 0.45 };
  });
}

/** A drinks can, dented, with a printed side and a bright end. */
export function can(canvas: Canvas, place: Place, owner: number, random: Random): void {
  const base = pick(LABELS, random);
  const second = pick(CAPS, random);
  const length = 82 + random() * 14;
  const radius = 22 + random() * 3;
  const seed = Math.floor(random() * 1e6);
  const crush = random() * 6;
  lay(canvas, place, length * 0.65, owner, (u, v) => {
    const t = (u + length / 2) / length;
    const end = radius * 0.28 * Math.sqrt(Math.max(0, 1 - (v / radius) ** 2));
    if (u < -length / 2 - end || u > length / 2 + end * 0.2) return undefined;
    const pinch = crush * Math.exp(-(((t - 0.5) / 0.2) ** 2)) * noise(seed, u * 0.02, seed);
    const taper = t < 0.06 || t > 0.94 ? 0.9 : 1;
    const r = radius * taper - pinch;
    if (Math.abs(v) > r) return undefined;
    const { ny, height } = tube(v, r);
    if (u < -length / 2 + end * 0.6) {
      // The lid turned towards us: bright metal with its ring.
      const d = Math.hypot((u + length / 2) / 0.28, v) / radius;
      const ringed = Math.abs(d - 0.82) < 0.07 ? 1.2 : 0;
      return { height, nx: -0.8 - ringed, ny: (v / radius) * 0.4, colour: [0.66, 0.67, 0.68], gloss: 0.9 };
    }
    const crease = (fractal(u * 0.05, v * 0.05, seed, 3) - 0.5) * (0.5 + crush * 0.35);
    const swirl = Math.sin(u * 0.09 + v * 0.06 + noise(u * 0.04, v * 0.04, seed) * 4);
    const colour =
      t < 0.06 || t > 0.94
        ? ([0.64, 0.65, 0.66] as const)
        : swirl > 0.55
          ? mix(second, [1, 1, 1], 0.1)
          : swirl < -0.85
            ? ([0.95, 0.95, 0.93] as const)
            : base;
    return { height, nx: crease, ny: ny + crease, colour, gloss: 0.7 };
  });
}

/** A net float: an ellipsoid with a seam, holes for the line and scuffs. */
export function float(canvas: Canvas, place: Place, owner: number, random: Random): void {
  const colour = pick(FLOATS, random);
  const a = 34 + random() * 12;
  const b = a * (0.72 + random() * 0.2);
  const seed = Math.floor(random() * 1e6);
  lay(canvas, place, a + 2, owner, (u, v) => {
    const q = (u / a) ** 2 + (v / b) ** 2;
    if (q > 1) return undefined;
    const z = Math.sqrt(Math.max(0.02, 1 - q));
    const scuff = fractal(u * 0.12, v * 0.12, seed, 4);
    const hole = Math.hypot(Math.abs(u) - a * 0.78, v) < 5;
    if (hole) return { height: b * 0.5, nx: 0, ny: 0, colour: [0.06, 0.05, 0.05], gloss: 0 };
    const seam = Math.abs(u) < 1.3 ? 0.7 : 0;
    return {
      height: b * (1 + z),
      nx: (u / a / z) * (b / a) + seam * Math.sign(u),
      ny: v / b / z,
      colour: mix(colour, scuff > 0.6 ? [0.45, 0.42, 0.36] : [0, 0, 0], scuff > 0.6 ? 0.4 : 0.06),
      gloss: 0.4,
    };
  });
}

type Point = readonly [number, number];

/** A point of a closed or open Catmull-Rom curve. */
function curve(points: readonly Point[], t: number): Point {
  const n = points.length - 1;
  const at = Math.min(n - 1e-6, Math.max(0, t * n));
  const i = Math.floor(at);
  const f = at - i;
  const p = (k: number): Point => points[Math.max(0, Math.min(n, k))] ?? [0, 0];
  const [p0, p1, p2, p3] = [p(i - 1), p(i), p(i + 1), p(i + 2)];
  const blend = (a: number, b: number, c: number, d: number) =>
    0.5 * (2 * b + (c - a) * f + (2 * a - 5 * b + 4 * c - d) * f * f + (3 * b - a - 3 * c + d) * f * f * f);
  return [blend(p0[0], p1[0], p2[0], p3[0]), blend(p0[1], p1[1], p2[1], p3[1])];
}

type StrandLook = {
  radius: number;
  colour: (along: number, across: number) => Rgb;
  twist: number;
  gloss: number;
  lift: number;
};

/** Lays a strand along a curve: round in section, with a twist if it is laid rope. */
function strand(canvas: Canvas, points: readonly Point[], owner: number, look: StrandLook): void {
  let length = 0;
  for (let i = 1; i < points.length; i++)
    length += Math.hypot(points[i]![0] - points[i - 1]![0], points[i]![1] - points[i - 1]![1]);
  const steps = Math.max(8, Math.ceil(length / Math.max(1.2, look.radius * 0.5)));
  const before = canvas.full[owner] ?? 0;
  for (let s = 0; s <= steps; s++) {
    const t = s / steps;
    const [x, y] = curve(points, t);
    const [qx, qy] = curve(points, Math.min(1, t + 0.004));
    const angle = Math.atan2(qy - y, qx - x);
    const along = t * length;
    const [cos, sin] = [Math.cos(angle), Math.sin(angle)];
    const r = look.radius;
    canvas.stamp([x - r - 1, y - r - 1, x + r + 1, y + r + 1], owner, (px, py) => {
      const u = (px - x) * cos + (py - y) * sin;
      const v = -(px - x) * sin + (py - y) * cos;
      if (u * u + v * v > r * r || Math.abs(v) > r) return undefined;
      const { ny, height } = tube(v, r * 1.02);
      const lay3 =
        look.twist > 0 ? Math.sin(((along + u) * 0.9) / (r * 0.55) + (v / r) * 2.2) * look.twist : 0;
      return {
        height: height + look.lift,
        nx: -ny * sin + lay3 * cos,
        ny: ny * cos + lay3 * sin,
        colour: look.colour(along + u, v / r),
        gloss: look.gloss,
      };
    });
  }
  if (owner > 0) canvas.full[owner] = before; // stamps overlap along a strand; the caller counts by owner
}

/** A length of laid rope in loose loops. Its full area is taken as what it covers when laid. */
export function rope(canvas: Canvas, place: Place, owner: number, random: Random): void {
  const colour = pick(ROPES, random);
  const radius = (4.2 + random() * 2.2) * place.scale;
  const turns = 1.2 + random() * 1.6;
  const size = (34 + random() * 34) * place.scale;
  const points: Point[] = [];
  const count = Math.ceil(turns * 9);
  for (let i = 0; i <= count; i++) {
    const angle = place.angle + (i / count) * turns * 2 * Math.PI;
    const r = size * (0.55 + 0.45 * random()) * (0.8 + 0.5 * (i / count));
    points.push([place.x + Math.cos(angle) * r * 1.25, place.y + Math.sin(angle) * r * 0.8]);
  }
  const [lastX, lastY] = points.at(-1) ?? [place.x, place.y];
  points.push([lastX + (random() - 0.3) * 70 * place.scale, lastY + (random() - 0.5) * 60 * place.scale]);
  const seed = Math.floor(random() * 1e6);
  strand(canvas, points, owner, {
    radius,
    twist: 1.1,
    gloss: 0.12,
    lift: 1,
    colour: (along, across) => mix(colour, [0.25, 0.22, 0.18], 0.35 * noise(along * 0.05, across * 2, seed)),
  });
  canvas.full[owner] = canvas.owner.reduce((sum, own) => sum + (own === owner ? 1 : 0), 0);
}

/** Strands of weed; they belong to no object and hide what lies below. */
export function weed(canvas: Canvas, place: Place, random: Random): void {
  const isKelp = random() < 0.3;
  const blades = isKelp ? 2 : 3 + Math.floor(random() * 5);
  for (let blade = 0; blade < blades; blade++) {
    const points: Point[] = [[place.x + (random() - 0.5) * 16, place.y + (random() - 0.5) * 12]];
    let angle = place.angle + (random() - 0.5) * 2.4;
    const parts = 3 + Math.floor(random() * 4);
    for (let i = 0; i < parts; i++) {
      const [x, y] = points.at(-1) ?? [0, 0];
      angle += (random() - 0.5) * 1.3;
      const step = (isKelp ? 34 : 17) * place.scale * (0.7 + random() * 0.6);
      points.push([x + Math.cos(angle) * step, y + Math.sin(angle) * step * 0.75]);
    }
    const tone = mix([0.13, 0.1, 0.04], [0.3, 0.24, 0.08], random());
    const seed = Math.floor(random() * 1e6);
    strand(canvas, points, 0, {
      radius: (isKelp ? 5 + random() * 4 : 2 + random() * 1.8) * place.scale,
      twist: isKelp ? 0.35 : 0.15,
      gloss: 0.55,
      lift: 2,
      colour: (along, across) => mix(tone, [0.42, 0.36, 0.14], 0.5 * noise(along * 0.12, across, seed)),
    });
    if (!isKelp && random() < 0.6) {
      const [x, y] = points[Math.floor(random() * points.length)] ?? [place.x, place.y];
      lay(canvas, { x, y, angle, scale: place.scale }, 6, 0, (u, v) => {
        const q = (u / 5) ** 2 + (v / 3.6) ** 2;
        if (q > 1) return undefined;
        const z = Math.sqrt(1 - q * 0.97);
        return { height: 6 * z + 3, nx: u / 5 / z, ny: v / 3.6 / z, colour: [0.34, 0.28, 0.1], gloss: 0.8 };
      });
    }
  }
}

/** A pebble or a shell; no object of the key. */
export function pebble(canvas: Canvas, place: Place, random: Random): void {
  const a = 4 + random() * random() * 26;
  const b = a * (0.6 + random() * 0.35);
  const tone = mix(mix([0.3, 0.29, 0.29], [0.62, 0.58, 0.52], random()), [0.45, 0.3, 0.24], random() * 0.4);
  const isShell = random() < 0.22;
  const seed = Math.floor(random() * 1e6);
  lay(canvas, place, a + 1, 0, (u, v) => {
    const wobble = 1 + 0.12 * (noise(Math.atan2(v, u) * 1.5 + 9, seed, seed) - 0.5);
    const q = ((u / a) ** 2 + (v / b) ** 2) / wobble;
    if (q > 1) return undefined;
    const z = Math.sqrt(Math.max(0.05, 1 - q * 0.95));
    if (isShell) {
      const ray = Math.sin(Math.atan2(v, u + a) * 30) * 0.5;
      return {
        height: b * 0.5 * z,
        nx: (u / a / z) * 0.6,
        ny: (v / b / z) * 0.6 + ray,
        colour: mix([0.82, 0.76, 0.66], [0.6, 0.45, 0.38], noise(u * 0.3, 1, seed)),
        gloss: 0.35,
      };
    }
    const vein = fractal(u * 0.14, v * 0.14, seed, 3);
    return {
      height: b * 0.8 * z,
      nx: (u / a / z) * 0.8,
      ny: (v / b / z) * 0.8,
      colour: mix(tone, [0.75, 0.73, 0.7], vein > 0.66 ? 0.6 : vein * 0.25),
      gloss: 0.12,
    };
  });
}

/** A leaf of a seedling: a pointed ellipse with a fold along its middle. Lies from the stem outwards. */
export function leaf(
  canvas: Canvas,
  place: Place,
  owner: number,
  { length, breadth, tone }: { length: number; breadth: number; tone: Rgb },
): void {
  lay(canvas, place, length + 2, owner, (u, v) => {
    if (u < 0 || u > length) return undefined;
    const t = u / length;
    const half = breadth * Math.sin(Math.PI * Math.pow(t, 0.8)) * (1 - 0.25 * t);
    if (Math.abs(v) > half) return undefined;
    const side = Math.sign(v) || 1;
    const vein =
      Math.abs(v) < 0.8
        ? 0.35
        : Math.abs(Math.sin((t * 22 - (Math.abs(v) / breadth) * 4) * 1.2)) < 0.12
          ? 0.12
          : 0;
    return {
      height: 7 + 9 * Math.sin(Math.PI * t),
      nx: -0.5 * Math.cos(Math.PI * t),
      ny: side * 0.38,
      colour: mix(tone, [0.8, 0.86, 0.5], vein),
      gloss: 0.28,
    };
  });
}
