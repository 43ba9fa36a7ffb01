import type { Drawable, Material } from "./film";
import type { Rgb } from "./light";
import { mixed, paint, printed, srgb, stain, varied, weather, type Print } from "./materials";
import { lathe, type Mesh } from "./mesh";
import { between, pick, pickWeighted, wholeBetween, type Random } from "./random";
import { CELL, CLOUD, CLOUD_TOO, GRIT, mix, ramp, tap } from "./texture";

/** A thing before it is laid down: its parts along the x axis in cm, and how it may lie. */
export type Model = {
  parts: { mesh: Mesh; material: Material; isClear: boolean }[];
  lengthCm: number;
  radiusCm: number;
  stops: number;
};

export type Placed = Omit<Drawable, "owner">;

const INKS: readonly [Rgb, ...Rgb[]] = [
  srgb(0xb3202a),
  srgb(0x1c4f9c),
  srgb(0x14703f),
  srgb(0xe07a12),
  srgb(0x3a2a78),
  srgb(0x0c7f8c),
  srgb(0xd7b31a),
  srgb(0x1d1f24),
];
const PAPERS: readonly [Rgb, ...Rgb[]] = [
  srgb(0xeeebe2),
  srgb(0xe8d9a8),
  srgb(0xcfe2ea),
  srgb(0xb3202a),
  srgb(0x1c4f9c),
  srgb(0x2b8a57),
  srgb(0xe9a23b),
];
const CAPS: readonly [Rgb, ...Rgb[]] = [
  srgb(0x1f5fc4),
  srgb(0xc8252c),
  srgb(0xe9e7e0),
  srgb(0x2f9a4c),
  srgb(0xf0b81e),
  srgb(0xe66a1f),
  srgb(0x8cc8dc),
  srgb(0x222428),
  srgb(0xd8579a),
];

const printOf = (random: Random): Print => ({
  paper: pick(PAPERS, random),
  ink: pick(INKS, random),
  accent: pick(INKS, random),
  seed: wholeBetween(random, 0, 4000),
});

/** Points [t, radius] of a profile, filled in by straight lines to `rows` even steps, the ends closed to the axis. */
function filled(
  points: readonly (readonly [number, number])[],
  length: number,
  radius: number,
  rows: number,
): [number, number][] {
  const profile: [number, number][] = [[0, 0]];
  for (let row = 0; row <= rows; row++) {
    const t = row / rows;
    const next = Math.max(
      1,
      points.findIndex(([at]) => at >= t),
    );
    const [fromT, from] = points[next - 1] ?? [0, 1];
    const [toT, to] = points[next] ?? [1, 1];
    const share = toT > fromT ? (t - fromT) / (toT - fromT) : 1;
    profile.push([t * length, radius * mix(from, to, share * share * (3 - 2 * share))]);
  }
  profile.push([length, 0]);
  return profile;
}

const BODIES = {
  drink: [
    [0, 0.62],
    [0.03, 0.9],
    [0.07, 1],
    [0.26, 1],
    [0.3, 0.94],
    [0.34, 1],
    [0.56, 1],
    [0.62, 0.99],
    [0.74, 0.8],
    [0.83, 0.52],
    [0.89, 0.37],
    [0.9, 0.36],
    [0.905, 0.47],
    [0.92, 0.47],
    [0.925, 0.37],
    [1, 0.37],
  ],
  water: [
    [0, 0.7],
    [0.02, 0.92],
    [0.05, 1],
    [0.66, 1],
    [0.7, 0.98],
    [0.8, 0.72],
    [0.87, 0.42],
    [0.9, 0.39],
    [0.905, 0.46],
    [0.92, 0.46],
    [0.925, 0.38],
    [1, 0.38],
  ],
  jug: [
    [0, 0.85],
    [0.03, 0.98],
    [0.06, 1],
    [0.58, 1],
    [0.68, 0.93],
    [0.78, 0.6],
    [0.84, 0.34],
    [0.9, 0.33],
    [0.91, 0.4],
    [1, 0.4],
  ],
  flask: [
    [0, 0.8],
    [0.04, 0.97],
    [0.1, 1],
    [0.7, 1],
    [0.8, 0.9],
    [0.85, 0.45],
    [0.88, 0.4],
    [1, 0.4],
  ],
} as const;

/** A plastic bottle: clear with a wrapper, or of solid colour; whole or crushed; with or without its cap. */
export function bottle(random: Random): Model {
  const body = pickWeighted(
    [
      ["drink", 4],
      ["water", 4],
      ["jug", 1.5],
      ["flask", 1.5],
    ] as const,
    random,
  );
  const isSolid = body === "jug" || body === "flask";
  const length = isSolid ? between(random, 16, 23) : between(random, 18, 25);
  const radius = length * (isSolid ? between(random, 0.15, 0.19) : between(random, 0.13, 0.155));
  const tint = isSolid
    ? varied(
        pick(
          [srgb(0xe6e3da), srgb(0x2f6fb5), srgb(0xd9c24a), srgb(0x3f9a78), srgb(0xc9463a), srgb(0xe2e6e8)],
          random,
        ),
        0.1,
        random,
      )
    : pickWeighted(
        [
          [srgb(0xe9f2f2), 4],
          [srgb(0xcfe6f2), 3],
          [srgb(0x7fbf86), 3],
          [srgb(0xb57a3c), 1.2],
          [srgb(0x8fb7e0), 1.5],
        ] as const,
        random,
      );
  const hasCap = random() < 0.68;
  const hasWrap = random() < (isSolid ? 0.7 : 0.6);
  const wrap = body === "water" ? ([0.34, 0.6] as const) : ([0.3, 0.6] as const);
  const torn = random() < 0.3 ? between(random, 0.3, 0.7) : 0;
  const print = printOf(random);
  const capColour = pick(CAPS, random);
  const crush = random() < 0.45 ? between(random, 0.15, 0.5) : between(random, 0, 0.08);
  const crushAt = between(random, 0.3, 0.6);
  const crushAngle = random() * 6.283;
  const ribs = body === "water" ? 0.035 : body === "drink" ? 0.012 : 0;
  const shift = random() * 512;
  const age = between(random, 0.05, 0.4);
  const seed = Math.floor(random() * 500);
  const profile = filled(BODIES[body], length, radius, 72);
  const capFrom = 0.925 * length;
  const mesh = lathe(profile, 32, (x, angle, r) => {
    const t = x / length;
    if (t > 0.86) return hasCap && x >= capFrom && r > 0 ? r * (1.22 + 0.03 * Math.cos(angle * 24)) : r;
    const ribbed = t > 0.1 && t < 0.68 ? 1 + ribs * Math.sin(t * 60) : 1;
    const soft = Math.exp(-(((t - crushAt) / 0.2) ** 2));
    const pinch =
      soft * crush * (0.5 + 0.5 * Math.cos(2 * (angle - crushAngle))) +
      crush * 0.35 * soft * tap(CLOUD, t * 90 + shift, Math.cos(angle) * 20 + Math.sin(angle) * 27);
    const flat = isSolid ? 1 - 0.28 * Math.sin(angle) ** 2 : 1;
    return r * ribbed * flat * Math.max(0.25, 1 - pinch);
  });
  const clearness = isSolid ? 1 : between(random, 0.05, 0.16);
  const material: Material = ({ x, y, z, u, v }, surface) => {
    const t = x / length;
    if (hasCap && x >= capFrom - 0.02) {
      paint(surface, capColour);
      surface.gloss = 0.4;
      const rib = Math.cos(v * 6.283 * 24);
      if (x < length - 0.1) stain(surface, [0, 0, 0], 0.18 * (0.5 + 0.5 * rib));
      return;
    }
    const edge = wrap[1] - torn * 0.2 * (1 + tap(CLOUD, v * 80 + shift, 7));
    if (hasWrap && t > wrap[0] && t < edge) {
      printed(surface, (t - wrap[0]) / (wrap[1] - wrap[0]), v, print);
      surface.bumpZ = 0.18 * crush * tap(CLOUD, x * 10, v * 90 + shift);
    } else {
      paint(surface, tint);
      surface.gloss = isSolid ? 0.5 : 0.92;
      surface.opacity = clearness + 0.35 * ramp(0.3, 0.9, tap(CLOUD_TOO, x * 7 + shift, v * 60)) * age;
      if (t > 0.905 && t < 0.925) surface.opacity = 0.85;
      if (t < 0.05) surface.opacity += 0.25;
      const crease = tap(CLOUD, x * 16 + shift, v * 100) * (0.03 + 0.22 * crush);
      surface.bumpX = crease;
      surface.bumpZ = -crease;
    }
    weather(surface, x, y, z, age * (0.75 + 0.3 * u), seed);
  };
  return {
    parts: [{ mesh, material, isClear: !isSolid }],
    lengthCm: length,
    radiusCm: radius,
    stops: isSolid ? 1 : 0.32,
  };
}

/** A bottle cap, standing on its rim or turned over. */
export function cap(random: Random): Model {
  const radius = between(random, 1.45, 2.1);
  const height = radius * between(random, 0.75, 1.05);
  const colour = varied(pick(CAPS, random), 0.1, random);
  const wall = 0.16;
  const profile: [number, number][] = [
    [height - wall, 0],
    [height - wall, radius * 0.5],
    [height - wall, radius - wall * 1.6],
    [height * 0.5, radius - wall],
    [0, radius - wall],
    [0, radius],
    [height * 0.28, radius],
    [height * 0.3, radius * 0.985],
    [height * 0.34, radius],
    [height * 0.86, radius],
    [height, radius * 0.9],
    [height, radius * 0.62],
    [height - 0.05, radius * 0.6],
    [height - 0.05, 0],
  ];
  const mesh = lathe(profile, 48, (x, angle, r) =>
    r > radius * 0.95 && x > height * 0.34 ? r * (1 + 0.025 * Math.cos(angle * 24)) : r,
  );
  const seed = Math.floor(random() * 500);
  const fade = random() * 0.3;
  const logo = random() < 0.5;
  const material: Material = ({ x, y, z, v }, surface) => {
    paint(surface, mixed(colour, [0.7, 0.68, 0.64], fade * (0.6 + 0.4 * tap(CLOUD, y * 40 + seed, z * 40))));
    const r = Math.hypot(y, z);
    if (r > radius * 0.93) stain(surface, [0, 0, 0], 0.22 * (0.5 + 0.5 * Math.cos(v * 6.283 * 24)));
    if (logo && x > height - 0.08 && r < radius * 0.5 && Math.sin(y * 6) * Math.cos(z * 5) > 0.2)
      stain(surface, [0.9, 0.9, 0.88], 0.8);
    surface.gloss = 0.42;
    weather(surface, x, y, z, 0.3, seed);
  };
  return { parts: [{ mesh, material, isClear: false }], lengthCm: height, radiusCm: radius, stops: 1 };
}

/** A drinks can: bare metal ends, printed side, dents or a crushed waist. */
export function can(random: Random): Model {
  const isSlim = random() < 0.35;
  const radius = isSlim ? 2.7 : 3.3;
  const length = isSlim ? between(random, 12.8, 14.5) : between(random, 11.2, 12.6);
  const print = printOf(random);
  const crush = random() < 0.55 ? between(random, 0.2, 0.55) : between(random, 0, 0.12);
  const [crushAt, crushAngle, shift] = [between(random, 0.35, 0.65), random() * 6.283, random() * 512];
  const rust = random() < 0.4 ? between(random, 0.3, 0.75) : 0;
  const seed = Math.floor(random() * 500);
  const isOpen = random() < 0.85;
  const points: [number, number][] = [
    [0.45, 0],
    [0.35, radius * 0.5],
    [0.02, radius * 0.72],
    [0, radius * 0.76],
    [0.2, radius * 0.82],
    [0.75, radius * 0.97],
    [1, radius],
  ];
  for (let row = 1; row < 30; row++) points.push([1 + (row / 30) * (length - 2.2), radius]);
  points.push(
    [length - 1.1, radius],
    [length - 0.7, radius * 0.94],
    [length - 0.3, radius * 0.83],
    [length - 0.2, radius * 0.82],
    [length, radius * 0.84],
    [length, radius * 0.8],
    [length - 0.3, radius * 0.77],
    [length - 0.3, radius * 0.4],
    [length - 0.3, 0],
  );
  const mesh = lathe(points, 36, (x, angle, r) => {
    const t = x / length;
    const soft = Math.exp(-(((t - crushAt) / 0.22) ** 2));
    const pinch =
      soft * crush * (0.45 + 0.55 * Math.cos(angle - crushAngle)) +
      0.5 * crush * soft * Math.abs(tap(CLOUD, t * 70 + shift, Math.cos(angle) * 22 + Math.sin(angle) * 31));
    return r * Math.max(0.3, 1 - pinch);
  });
  const material: Material = ({ x, y, z, v }, surface) => {
    const r = Math.hypot(y, z);
    if (x > 0.8 && x < length - 0.85) {
      printed(surface, (x - 0.8) / (length - 1.65), v, print);
      surface.gloss = 0.72;
      surface.metal = 0.3;
    } else {
      paint(surface, [0.55, 0.56, 0.57]);
      surface.gloss = 0.75;
      surface.metal = 0.85;
      if (x > length - 0.4) {
        if (isOpen && Math.hypot(y - radius * 0.36, z * 0.8) < radius * 0.27) {
          paint(surface, [0.01, 0.01, 0.01]);
          surface.metal = 0;
        }
        if (Math.hypot(y + radius * 0.1, z * 1.7) < radius * 0.26) paint(surface, [0.36, 0.37, 0.38]);
        if (Math.abs(r - radius * 0.62) < 0.06) paint(surface, [0.3, 0.31, 0.32]);
      }
    }
    const crease = tap(CLOUD, x * 14 + shift, v * 90) * (0.04 + 0.55 * crush);
    surface.bumpX = crease;
    surface.bumpZ = -crease;
    const rusty = ramp(
      1.15 - rust,
      1.4 - rust,
      0.5 + tap(CLOUD_TOO, x * 22 + shift, v * 160) * 0.6 + (x < 1 || x > length - 1 ? 0.25 : 0),
    );
    if (rusty > 0) {
      stain(surface, mixed(RUSTY, RUSTED, 0.5 + 0.5 * tap(GRIT, x * 60, v * 300)), rusty * 0.9);
      surface.gloss *= 1 - rusty;
      surface.metal *= 1 - rusty;
    }
    weather(surface, x, y, z, 0.3, seed);
  };
  return { parts: [{ mesh, material, isClear: false }], lengthCm: length, radiusCm: radius, stops: 1 };
}

const CHALK: Rgb = [0.62, 0.58, 0.52];
const RUSTY = srgb(0x6b3a1c);
const RUSTED = srgb(0x3a2114);
const FLOATS: readonly [Rgb, ...Rgb[]] = [
  srgb(0xe2661a),
  srgb(0xe2661a),
  srgb(0xedb51f),
  srgb(0xd8d6cc),
  srgb(0x2a62a8),
  srgb(0xc5342b),
  srgb(0x2f7d55),
  srgb(0x24262a),
];

/** A float of a net: an egg, a ball or a roll with a hole for the line, scuffed, perhaps with barnacles. */
export function float(random: Random): Model {
  const shape = pickWeighted(
    [
      ["egg", 3],
      ["ball", 2],
      ["roll", 2],
    ] as const,
    random,
  );
  const half =
    shape === "ball"
      ? between(random, 4.8, 7)
      : shape === "egg"
        ? between(random, 6, 9)
        : between(random, 5, 7.5);
  const radius =
    shape === "ball"
      ? half * 0.96
      : shape === "egg"
        ? half * between(random, 0.58, 0.7)
        : between(random, 3.2, 4.6);
  const hole = radius * between(random, 0.16, 0.24);
  const roundness = shape === "roll" ? 4.5 : 2;
  const end = half * (1 - (hole / radius) ** roundness) ** (1 / roundness);
  const profile: [number, number][] = [[-end + half * 0.5, hole * 0.9]];
  for (let i = 0; i <= 40; i++) {
    const x = -end * Math.cos((i / 40) * Math.PI);
    profile.push([
      x,
      Math.max(hole, radius * Math.max(0, 1 - Math.abs(x / half) ** roundness) ** (1 / roundness)),
    ]);
  }
  profile.push([end - half * 0.5, hole * 0.9]);
  const colour = varied(pick(FLOATS, random), 0.12, random);
  const stripe = random() < 0.25 ? pick([srgb(0xe8e4da), srgb(0x1f2226)], random) : undefined;
  const [shift, seed, age] = [random() * 512, Math.floor(random() * 500), between(random, 0.15, 0.5)];
  const barnacles = random() < 0.4 ? between(random, 0.1, 0.35) : 0;
  const mesh = lathe(
    profile,
    36,
    (x, _, r) => r * (Math.abs(x) < half * 0.06 && shape !== "roll" ? 1.015 : 1),
  );
  const material: Material = ({ x, y, z, v }, surface) => {
    const r = Math.hypot(y, z);
    paint(surface, colour);
    if (stripe && Math.abs(x) < half * 0.22) paint(surface, stripe);
    surface.gloss = 0.38;
    const scuff = ramp(0.25, 0.85, tap(CLOUD, x * 12 + shift, v * 150) + 0.5 * tap(GRIT, x * 50, v * 400));
    stain(surface, mixed(surfaceOf(surface), CHALK, 0.6), scuff * age);
    stain(surface, [0.12, 0.13, 0.05], ramp(0.3, 0.9, tap(CLOUD_TOO, x * 9 + shift, v * 90)) * age * 0.7);
    surface.gloss *= 1 - 0.7 * scuff;
    const dirt = tap(GRIT, x * 36 + shift, v * 300) * 0.16;
    surface.bumpX = dirt;
    surface.bumpZ = -dirt;
    if (barnacles > 0) {
      const cell = tap(CELL, x * 13 + shift, v * 150);
      if (tap(CLOUD, x * 8 + shift + 50, v * 80) > 0.7 - barnacles * 2) {
        stain(surface, [0.66, 0.63, 0.57], ramp(0.42, 0.3, cell));
        stain(surface, [0.08, 0.07, 0.06], ramp(0.12, 0.05, cell));
      }
    }
    if (r < hole * 1.12) stain(surface, [0.015, 0.012, 0.01], 0.9);
    weather(surface, x, y, z, 0.32, seed);
  };
  return { parts: [{ mesh, material, isClear: false }], lengthCm: half * 2, radiusCm: radius, stops: 1 };
}

const surfaceOf = ({ r, g, b }: { r: number; g: number; b: number }): Rgb => [r, g, b];
