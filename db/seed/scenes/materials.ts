import type { Material, Surface } from "./film";
import type { Rgb } from "./light";
import { between, hash, type Random } from "./random";
import { CELL, CLOUD, CLOUD_TOO, GRIT, mix, ramp, tap } from "./texture";

/** Sets a surface's colour. */
export function paint(surface: Surface, [r, g, b]: Rgb): void {
  surface.r = r;
  surface.g = g;
  surface.b = b;
}

/** Moves a surface's colour towards another. */
export function stain(surface: Surface, [r, g, b]: Rgb, share: number): void {
  surface.r = mix(surface.r, r, share);
  surface.g = mix(surface.g, g, share);
  surface.b = mix(surface.b, b, share);
}

export const mixed = (a: Rgb, b: Rgb, share: number): Rgb => [
  mix(a[0], b[0], share),
  mix(a[1], b[1], share),
  mix(a[2], b[2], share),
];

/** A colour from sRGB bytes, linear. */
export function srgb(hex: number): Rgb {
  const linear = (byte: number) =>
    byte / 255 <= 0.04045 ? byte / 255 / 12.92 : ((byte / 255 + 0.055) / 1.055) ** 2.4;
  return [linear((hex >> 16) & 255), linear((hex >> 8) & 255), linear(hex & 255)];
}

/** A colour moved a little in lightness and hue, as no two things are the same. */
export function varied([r, g, b]: Rgb, by: number, random: Random): Rgb {
  const light = 1 + by * (random() * 2 - 1);
  return [
    r * light * (1 + by * 0.4 * (random() - 0.5)),
    g * light * (1 + by * 0.4 * (random() - 0.5)),
    b * light * (1 + by * 0.4 * (random() - 0.5)),
  ];
}

const WET_SAND: Rgb = [0.2, 0.155, 0.105];

/** Sand that sticks to the lower half of what lies on the beach, and scuffs all over. `spread` 0..1. */
export function weather(
  surface: Surface,
  x: number,
  y: number,
  z: number,
  spread: number,
  seed: number,
): void {
  const grime = tap(CLOUD, x * 9 + seed, (y + z) * 9) * 0.6 + tap(GRIT, x * 40, (y - z) * 40 + seed) * 0.45;
  const stuck = ramp(1.15 - spread, 1.5 - spread, grime + 0.35);
  if (stuck > 0) {
    stain(surface, WET_SAND, stuck * 0.85);
    surface.gloss *= 1 - 0.8 * stuck;
    surface.metal *= 1 - stuck;
    surface.opacity = mix(surface.opacity, 1, stuck * 0.8);
  }
}

export type Print = { paper: Rgb; ink: Rgb; accent: Rgb; seed: number };

/** A printed wrapper: `u` along the object and `v` round it, both 0..1. Marks are invented shapes and lines, no words. */
export function printed(surface: Surface, u: number, v: number, { paper, ink, accent, seed }: Print): void {
  paint(surface, paper);
  const face = (v * 2) % 1;
  const style = seed % 4;
  if (u < 0.07 || u > 0.93) paint(surface, ink);
  else if (u < 0.1 || u > 0.9) paint(surface, accent);
  if (style === 0) {
    const wave = 0.5 + 0.16 * Math.sin(face * 6.283 + seed);
    if (u > wave && u < wave + 0.28) paint(surface, ink);
    if (u > wave + 0.28 && u < wave + 0.32) paint(surface, accent);
  } else if (style === 1) {
    const round = Math.hypot((u - 0.52) * 1.15, (face - 0.5) * 1.5);
    if (round < 0.34) paint(surface, ink);
    if (round < 0.28) paint(surface, accent);
    if (round < 0.26 && Math.abs(u - 0.52 - 0.1 * Math.sin(face * 25)) < 0.07) paint(surface, paper);
  } else if (style === 2) {
    if (Math.sin((u * 2.2 + face) * 9) > 0.45) paint(surface, ink);
    if (Math.abs(face - 0.5) < 0.2 && u > 0.2 && u < 0.8) paint(surface, paper);
    if (Math.abs(face - 0.5) < 0.1 && u > 0.25 && u < 0.75) paint(surface, accent);
  } else {
    if (u < 0.45) paint(surface, ink);
    const leaf = Math.abs(face - 0.5) * 3 - Math.sqrt(Math.max(0, 0.09 - (u - 0.45) ** 2)) * 2.2;
    if (leaf < 0) paint(surface, accent);
  }
  // Rows of small print.
  if (face > 0.82 && face < 0.98 && u > 0.16 && u < 0.84) {
    const row = Math.floor(face * 60);
    if (row % 2 === 0 && hash(Math.floor(u * 46), row, seed) > 0.35)
      paint(surface, style === 3 && u < 0.45 ? paper : ink);
  }
  surface.gloss = 0.45;
}

const OLIVE: Rgb = srgb(0x4d441c);
const UMBER: Rgb = srgb(0x33240f);
const RUST: Rgb = srgb(0x5c3317);
const DRY: Rgb = srgb(0x1c1712);
const STRAW: Rgb = srgb(0x9a865a);

/** Brown weed: wet and olive or dry and nearly black, with a paler edge and a darker rib. */
export function weedMaterial(random: Random, dryness: number): Material {
  const fresh = mixed(mixed(OLIVE, UMBER, random()), RUST, random() * 0.5);
  const body = varied(mixed(fresh, random() < 0.12 ? STRAW : DRY, dryness), 0.25, random);
  const gloss = mix(0.62, 0.25, dryness);
  const shift = random() * 512;
  return ({ x, y, u, v }, surface) => {
    const patch = tap(CLOUD, x * 14 + shift, y * 14) * 0.35;
    const rib = 1 - 0.35 * Math.exp(-(((v - 0.5) / 0.1) ** 2));
    paint(surface, body);
    const light = (1 + patch + 0.35 * (u - 0.5)) * rib;
    surface.r *= light;
    surface.g *= light;
    surface.b *= light;
    surface.gloss = gloss;
    surface.thin = 0.25;
    const grain = tap(GRIT, x * 30 + shift, y * 30) * 0.12;
    surface.bumpX = grain;
    surface.bumpY = -grain;
  };
}

/** Green sheets of weed, thin enough for light to pass. */
export function lettuceMaterial(random: Random): Material {
  const body = varied(mixed(srgb(0x55702c), srgb(0x37521f), random()), 0.2, random);
  return ({ x, y }, surface) => {
    const fold = 1 + 0.55 * tap(CLOUD_TOO, x * 26, y * 26);
    paint(surface, [body[0] * fold, body[1] * fold, body[2] * fold]);
    surface.gloss = 0.6;
    surface.thin = 0.4;
    surface.bumpX = 0.5 * tap(CLOUD, x * 30, y * 30);
    surface.bumpY = 0.5 * tap(CLOUD, x * 30 + 99, y * 30);
  };
}

const VEIN: Rgb = [0.66, 0.63, 0.58];
const STONES: readonly [Rgb, ...Rgb[]] = [
  srgb(0x7c7a78),
  srgb(0x5b5c61),
  srgb(0x8f8375),
  srgb(0x6d5a50),
  srgb(0xa59c8e),
  srgb(0x494745),
  srgb(0x84706a),
  srgb(0xb9b2a6),
];

/** A pebble of one of several rocks: speckled, banded with a pale vein, or plain. Damp ones are darker and shine. */
export function stoneMaterial(random: Random, damp: number): Material {
  const base = varied(STONES[Math.floor(random() * STONES.length)] ?? STONES[0], 0.25, random);
  const kind = random();
  const shift = random() * 512;
  const turn = random() * 3;
  const veinAt = between(random, -0.3, 0.3);
  const dark = mix(0.85, 0.45, damp);
  return ({ x, y, z }, surface) => {
    const cloud = tap(CLOUD, x * 18 + shift, y * 18 + z * 11);
    let light = (1 + 0.22 * cloud) * dark;
    if (kind < 0.35) light *= 1 + 0.55 * tap(GRIT, x * 46 + shift, y * 46 + z * 30);
    else if (kind < 0.6)
      light *= 1 + 0.2 * Math.sin((x * Math.cos(turn) + y * Math.sin(turn) + 0.2 * cloud) * 7 + shift);
    paint(surface, [base[0] * light, base[1] * light, base[2] * light]);
    if (kind > 0.8) {
      const vein = Math.abs(x * Math.cos(turn) + y * Math.sin(turn) + 0.25 * cloud - veinAt);
      stain(surface, VEIN, ramp(0.13, 0.06, vein) * 0.8);
    }
    surface.gloss = mix(0.12, 0.5, damp);
    const grain = tap(GRIT, x * 60, y * 60 + shift) * 0.14;
    surface.bumpX = grain;
    surface.bumpZ = -grain;
  };
}

/** Bleached wood with grain along its length and checks. */
export function woodMaterial(random: Random): Material {
  const base = varied(mixed(srgb(0x9b8a76), srgb(0x6f5b47), random()), 0.15, random);
  const shift = random() * 512;
  return ({ u, v }, surface) => {
    const grain = tap(CLOUD, u * 40 + shift, v * 420) + 0.6 * tap(GRIT, u * 60, v * 500 + shift);
    const check = ramp(0.55, 0.8, tap(CLOUD_TOO, u * 30 + shift, v * 260));
    const light = (1 + 0.26 * grain) * (1 - 0.65 * check);
    paint(surface, [base[0] * light, base[1] * light, base[2] * light]);
    surface.gloss = 0.06;
    surface.bumpZ = 0.35 * grain;
    surface.bumpX = 0.2 * grain;
  };
}

/** Shell: ribs from the hinge and rings of growth. `v` runs from one end of the fan to the other. */
export function shellMaterial(random: Random, isMussel: boolean): Material {
  const pale = isMussel
    ? srgb(0x2b3046)
    : varied(mixed(srgb(0xe6dac6), srgb(0xc99f80), random()), 0.1, random);
  const dark = isMussel ? srgb(0x14141d) : mixed(pale, srgb(0x8c5a3f), 0.6);
  const rings = between(random, 14, 30);
  const seed = random() * 99;
  return ({ u, v }, surface) => {
    const ring = 0.5 + 0.5 * Math.sin(u * rings + tap(CLOUD, v * 60 + seed, u * 20) * 2);
    paint(surface, mixed(pale, dark, ring * 0.55 * (0.4 + u)));
    surface.gloss = isMussel ? 0.6 : 0.25;
    if (isMussel) stain(surface, [0.55, 0.56, 0.6], ramp(0.5, 0.9, tap(CELL, u * 40, v * 40)) * 0.3);
  };
}
