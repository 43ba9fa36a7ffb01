import type { Material } from "./film";
import type { Rgb } from "./light";
import type { Placed } from "./litter";
import { mixed, paint, srgb, stain, varied } from "./materials";
import { pose, posed, sheet, smoothCurve, tube, type Vec } from "./mesh";
import { between, nearZero, type Random } from "./random";
import { CLOUD, GRIT, ramp, tap } from "./texture";

export type Species = "tomato" | "cabbage" | "lettuce" | "basil";

type LeafShape = { half: (u: number) => number; notch: number; fold: number; droop: number; ruffle: number };

const SEED_LEAVES: Record<Species, LeafShape> = {
  tomato: {
    half: (u) => 0.2 * Math.sin(Math.PI * u ** 0.85) ** 0.8,
    notch: 0,
    fold: 0.1,
    droop: 0.25,
    ruffle: 0,
  },
  cabbage: {
    half: (u) => 0.56 * Math.sin(Math.PI * Math.min(1, u) ** 1.5) ** 0.7,
    notch: 0.24,
    fold: 0.14,
    droop: 0.15,
    ruffle: 0,
  },
  lettuce: {
    half: (u) => 0.33 * Math.sin(Math.PI * u ** 1.25) ** 0.75,
    notch: 0.03,
    fold: 0.06,
    droop: 0.2,
    ruffle: 0.02,
  },
  basil: {
    half: (u) => 0.5 * Math.sin(Math.PI * u ** 0.9) ** 0.62,
    notch: 0.06,
    fold: -0.1,
    droop: 0.2,
    ruffle: 0,
  },
};

const TRUE_LEAVES: Record<Species, LeafShape> = {
  tomato: {
    half: (u) => 0.36 * Math.sin(Math.PI * u ** 0.8) ** 0.9 * (0.62 + 0.38 * Math.abs(Math.sin(u * 9.5))),
    notch: 0,
    fold: 0.16,
    droop: 0.4,
    ruffle: 0.06,
  },
  cabbage: {
    half: (u) => 0.46 * Math.sin(Math.PI * u ** 1.2) ** 0.62 * (0.94 + 0.06 * Math.sin(u * 34)),
    notch: 0,
    fold: 0.16,
    droop: 0.3,
    ruffle: 0.05,
  },
  lettuce: {
    half: (u) => 0.3 * Math.sin(Math.PI * u ** 1.4) ** 0.6 * (0.95 + 0.05 * Math.sin(u * 26)),
    notch: 0,
    fold: 0.08,
    droop: 0.45,
    ruffle: 0.09,
  },
  basil: {
    half: (u) => 0.35 * Math.sin(Math.PI * u ** 0.82) ** 0.85,
    notch: 0,
    fold: -0.16,
    droop: 0.35,
    ruffle: 0.02,
  },
};

const GREENS: Record<Species, Rgb> = {
  tomato: srgb(0x47702f),
  cabbage: srgb(0x577f55),
  lettuce: srgb(0x7a9a42),
  basil: srgb(0x477b33),
};

/**
 * A seedling with its stem at x, y and z of the compost: two seed leaves and, as `growth` goes from 0 to 1, up to two
 * pairs of true leaves. Spans about 2 to 8 cm.
 */
export function seedling(
  x: number,
  y: number,
  z: number,
  species: Species,
  growth: number,
  random: Random,
): Placed[] {
  const tone = varied(GREENS[species], 0.16, random);
  const lean = random() * 6.283;
  const height = between(random, 0.7, 1.3) + growth * 1.5;
  const off = height * between(random, 0.05, 0.32);
  const top: Vec = [x + Math.cos(lean) * off, y + Math.sin(lean) * off, z + height];
  const stemTone = mixed(tone, srgb(0x8a4a58), species === "cabbage" || species === "tomato" ? 0.45 : 0.12);
  const stemMaterial: Material = (_, surface) => {
    paint(surface, stemTone);
    surface.gloss = 0.25;
    surface.thin = 0.2;
  };
  const stem = smoothCurve(
    [
      [x, y, z - 0.2],
      [x + Math.cos(lean) * off * 0.25, y + Math.sin(lean) * off * 0.25, z + height * 0.5],
      top,
    ],
    5,
  );
  const parts: Placed[] = [
    { mesh: tube(stem, 8, () => 0.075 + 0.035 * growth), material: stemMaterial, isClear: false },
  ];
  const put = (
    angle: number,
    level: number,
    length: number,
    stalk: number,
    shape: LeafShape,
    colour: Rgb,
  ): void => {
    const from: Vec = [x + (top[0] - x) * level, y + (top[1] - y) * level, z + height * level];
    const rise = between(random, 0.12, 0.5);
    const joint: Vec = [
      from[0] + Math.cos(angle) * stalk,
      from[1] + Math.sin(angle) * stalk,
      from[2] + stalk * Math.tan(rise),
    ];
    if (stalk > 0.1) {
      const middle: Vec = [
        (from[0] + joint[0]) / 2,
        (from[1] + joint[1]) / 2,
        (from[2] + joint[2]) / 2 + 0.05,
      ];
      parts.push({
        mesh: tube(smoothCurve([from, middle, joint], 3), 6, () => 0.06 + 0.02 * growth),
        material: stemMaterial,
        isClear: false,
      });
    }
    const at = pose(joint[0], joint[1], joint[2], { yaw: angle, pitch: rise, roll: nearZero(random) * 0.4 });
    parts.push({
      mesh: posed(leafMesh(length, shape, random), at),
      material: leafMaterial(colour, length, random),
      isClear: false,
    });
  };
  const turn = random() * 6.283;
  const seedLength =
    between(random, 0.85, 1.25) *
    (0.75 + 0.55 * Math.min(1, growth * 2)) *
    (species === "tomato" ? 1.7 : 1.15);
  for (const side of [0, 1])
    put(
      turn + side * Math.PI + nearZero(random) * 0.35,
      0.86,
      seedLength * between(random, 0.88, 1.1),
      0.25 + 0.3 * growth,
      SEED_LEAVES[species],
      mixed(tone, srgb(0xa8bb5a), 0.22),
    );
  const pairs = growth < 0.28 ? 0 : growth < 0.68 ? 1 : 2;
  for (let pair = 0; pair < pairs; pair++) {
    const age = pair === 0 ? Math.min(1, (growth - 0.2) * 1.5) : Math.min(1, (growth - 0.55) * 1.3);
    const count = random() < 0.12 ? 1 : 2;
    for (let side = 0; side < count; side++) {
      const angle = turn + Math.PI / 2 + (pair * Math.PI) / 2.4 + side * Math.PI + nearZero(random) * 0.5;
      const length = between(random, 2.4, 3.3) * (0.35 + 0.75 * age) * (species === "lettuce" ? 1.25 : 1);
      put(
        angle,
        1 + pair * 0.08,
        length,
        (0.3 + 0.55 * age) * (species === "lettuce" ? 0.3 : 1),
        TRUE_LEAVES[species],
        mixed(tone, srgb(0x9fbf4a), pair * 0.18),
      );
    }
  }
  return parts;
}

/** A leaf along x from its joint at the origin, `length` cm. */
function leafMesh(length: number, { half, notch, fold, droop, ruffle }: LeafShape, random: Random) {
  const shift = random() * 512;
  const curl = droop * between(random, 0.4, 1.5);
  const twist = nearZero(random) * 0.5;
  return sheet(20, 10, false, (u, v, out) => {
    const side = v * 2 - 1;
    const wide = length * (half(u) * (1 + 0.08 * tap(CLOUD, u * 60 + shift, side * 9)) + 0.012);
    out[0] = length * (u - notch * u ** 6 * Math.exp(-((side / 0.42) ** 2)));
    out[1] = side * wide;
    out[2] =
      length * (0.3 * u - curl * u * u) +
      fold * Math.abs(side) * wide * 2 +
      twist * side * wide * u +
      ruffle * length * Math.abs(side) * tap(CLOUD, u * 90 + shift, side * 20);
  });
}

function leafMaterial(colour: Rgb, length: number, random: Random): Material {
  const shift = random() * 512;
  const veins = Math.max(4, Math.round(length * 3.2));
  const pale = mixed(colour, srgb(0xc9d890), 0.55);
  const tired = random() < 0.18 ? between(random, 0.3, 0.8) : 0;
  return ({ x, y, u, v }, surface) => {
    const side = Math.abs(v * 2 - 1);
    const patch = tap(CLOUD, x * 24 + shift, y * 24);
    const light = 1 + 0.22 * patch + 0.1 * tap(GRIT, x * 70, y * 70 + shift);
    paint(surface, [colour[0] * light, colour[1] * light, colour[2] * light]);
    const phase = (u * veins - side * 1.1) % 1;
    const rib = Math.max(
      ramp(0.13, 0.03, side),
      0.5 * ramp(0.16, 0.04, Math.abs(phase < 0 ? phase + 1 : phase)) * ramp(0.95, 0.4, side),
    );
    stain(surface, pale, rib * 0.6);
    if (tired > 0) stain(surface, YELLOW, tired * ramp(0.55, 1.05, u + 0.35 * patch));
    surface.gloss = 0.4;
    surface.thin = 0.45;
    surface.bumpX = 0.25 * patch;
    surface.bumpY = 0.25 * tap(CLOUD, x * 24 + 90, y * 24 + shift) + 0.25 * rib * Math.sign(v - 0.5);
  };
}

const YELLOW = srgb(0xb59a3e);
