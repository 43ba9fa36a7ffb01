import { wrackDensity, type Beach, type Ground } from "./beach";
import type { Surface } from "./film";
import type { Rgb } from "./light";
import { mixed, srgb, stain } from "./materials";
import { hash } from "./random";
import type { Relief } from "./relief";
import { CELL, CLOUD, CLOUD_TOO, GRIT, mix, ramp, SEAM, tap } from "./texture";

const MAT_DARK = srgb(0x221a10);
const MAT_PALE = srgb(0x574327);

const SANDS: Record<Ground, readonly [Rgb, Rgb]> = {
  golden: [srgb(0xc2b297), srgb(0xb4a07f)],
  grey: [srgb(0xb3ada2), srgb(0x9c9488)],
  dark: [srgb(0x6d6661), srgb(0x57524f)],
  shingle: [srgb(0xa89d8c), srgb(0x8f8576)],
};

/** Sand, wet or dry, the mat under the weed, and the shallow water with its foam. */
export function sandSurface(
  relief: Relief,
  beach: Beach,
  { ground, seed }: { ground: Ground; seed: number },
): (x: number, y: number, surface: Surface) => number {
  const [pale, warm] = SANDS[ground];
  const shift = (seed * 37) % 512;
  const water = mixed(srgb(0x4b6b66), srgb(0x3c6a78), hash(seed, 1, 1));
  return (x, y, surface) => {
    const s = beach.inland(x, y);
    const along = beach.along(x, y);
    const slopeX = relief.fallX(x, y);
    const slopeY = relief.fallY(x, y);
    const grain = hash(x * 9.7, y * 9.7, seed);
    const patch = tap(CLOUD, x * 0.9 + shift, y * 0.9);
    const fineX = tap(GRIT, x * 11, y * 11 + shift);
    const fineY = tap(GRIT, x * 11 + 211, y * 11);
    const tideAt = beach.wrackAt - 12 + 9 * tap(CLOUD_TOO, along * 1.1 + shift, 9);
    const wet = beach.hasWater || beach.wrackAt > 0 ? ramp(tideAt + 16, tideAt - 26, s + 3 * fineX) : 0;
    const film = beach.hasWater ? ramp(26, 6, s + 9 * patch) : 0;
    const tone = 0.5 + 0.5 * tap(CLOUD_TOO, x * 1.7, y * 1.7 + shift);
    let light = (0.92 + 0.16 * patch) * (0.9 + 0.2 * grain + 0.1 * fineY);
    if (grain > 0.975) light *= 1.35;
    if (hash(x * 7.1 + 5, y * 7.1, seed + 3) > 0.982) light *= 0.42;
    const soak = mix(1, 0.43, wet) * (1 - 0.12 * film);
    surface.r = mix(pale[0], warm[0], tone) * light * soak;
    surface.g = mix(pale[1], warm[1], tone) * light * mix(1, 0.41, wet);
    surface.b = mix(pale[2], warm[2], tone) * light * mix(1, 0.38, wet);
    const rough = mix(0.24, 0.1, wet) * (1 - 0.8 * film);
    surface.bumpX = slopeX * (1 - 0.6 * film) + fineX * rough;
    surface.bumpY = slopeY * (1 - 0.6 * film) + fineY * rough;
    surface.gloss = mix(0.03, 0.42, wet) + 0.45 * film;
    const mat = wrackDensity(beach, s, along);
    if (mat > 0.15) {
      const threads = Math.max(
        Math.abs(tap(CLOUD, x * 8 + shift, y * 34)),
        Math.abs(tap(CLOUD_TOO, x * 30, y * 9)),
      );
      const cover = ramp(0.3, 0.95, mat + 0.45 * tap(CLOUD, x * 4 + 31, y * 4) + 0.1 * fineX);
      stain(surface, mixed(MAT_DARK, MAT_PALE, threads), cover * 0.9);
      surface.bumpX += cover * 0.5 * tap(CLOUD, x * 26, y * 26 + shift);
      surface.bumpY += cover * 0.5 * tap(CLOUD, x * 26 + 130, y * 26);
    }
    if (beach.hasWater) wash(surface, x, y, s, shift, water);
    return 0;
  };
}

/** Shallow water over the sand: it darkens and tints with depth, mirrors the sky, and carries foam in lace and at its edge. */
function wash(surface: Surface, x: number, y: number, s: number, shift: number, water: Rgb): void {
  const edge = s + 2.2 * tap(CLOUD, x * 3 + shift, y * 3);
  if (edge > 7) return;
  const depth = Math.max(0, -edge);
  const under = ramp(0.6, -0.4, edge);
  if (under > 0) {
    const murk = 1 - Math.exp(-depth / 38);
    stain(surface, water, murk * 0.85 * under);
    const [waveX, waveY] = [tap(CLOUD, x * 2.6 + shift, y * 4.2), tap(CLOUD_TOO, x * 2.9, y * 4.4 + shift)];
    const chop = Math.min(1, 0.25 + depth / 30);
    surface.bumpX = mix(surface.bumpX, (0.14 * waveX + 0.05 * tap(GRIT, x * 2.5, y * 2.5)) * chop, under);
    surface.bumpY = mix(
      surface.bumpY,
      (0.18 * waveY + 0.05 * tap(GRIT, x * 2.5 + 99, y * 2.5)) * chop,
      under,
    );
    surface.gloss = mix(surface.gloss, 0.97, under);
    // Ripples gather light on the bed.
    const web = 1 - Math.min(1, 3 * tap(SEAM, x * 1.9 + 8 * waveX, y * 1.9 + 8 * waveY));
    const bright = 1 + 0.35 * web * under * ramp(1, 8, depth) * (1 - murk);
    surface.r *= bright;
    surface.g *= bright;
    surface.b *= bright;
  }
  const lace =
    1 - tap(SEAM, x * 3.1 + 9 * tap(CLOUD, x * 2 + shift, y * 2), y * 3.1 + 9 * tap(CLOUD_TOO, x * 2, y * 2));
  const small = 1 - tap(SEAM, x * 9.5, y * 9.5 + shift);
  const bands =
    Math.exp(-(((edge + 1.2) / 2.1) ** 2)) +
    0.62 * ramp(0.1, 0.75, tap(CLOUD, x * 0.7 + shift, edge * 1.9)) * ramp(2, -9, edge) +
    0.5 * Math.exp(-(((edge + 30) / 8) ** 2));
  const foam = ramp(0.98, 1.5, bands * 0.62 + lace * 0.62 + small * 0.18) * ramp(3.5, 0.5, edge);
  if (foam > 0) {
    const bubble = 0.8 + 0.2 * tap(CELL, x * 14, y * 14);
    stain(surface, [0.8 * bubble, 0.82 * bubble, 0.81 * bubble], Math.min(0.96, foam));
    surface.gloss = mix(surface.gloss, 0.2, foam);
    surface.bumpX += foam * 0.35 * tap(CLOUD, x * 14, y * 14 + shift);
    surface.bumpY += foam * 0.35 * tap(CLOUD, x * 14 + 77, y * 14);
  }
}
