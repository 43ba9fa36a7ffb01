import { groundAt, type Camera } from "./camera";
import { between, nearZero, pickWeighted, type Random } from "./random";
import { CLOUD, CLOUD_TOO, GRIT, mix, ramp, tap } from "./texture";

/** Colour and coarseness of a beach. */
export type Ground = "golden" | "grey" | "dark" | "shingle";

/** Where things are along the beach: how far inland a place is from the water's edge, cm, and how dense the wrack is. */
export type Beach = {
  inland: (x: number, y: number) => number;
  along: (x: number, y: number) => number;
  wrackAt: number;
  wrackWidth: number;
  hasWater: boolean;
};

/** A beach for what a camera sees: water at the top of most pictures, at a side of some, out of sight of others. */
export function layBeach(camera: Camera, random: Random): Beach {
  const [cx, cy] = groundAt(camera, camera.width / 2, camera.height / 2);
  const turn = pickWeighted(
    [
      [nearZero(random) * 0.6, 6],
      [between(random, 0.9, 1.4) * (random() < 0.5 ? 1 : -1), 1.5],
    ] as const,
    random,
  );
  const [ux, uy] = [Math.sin(turn), -Math.cos(turn)];
  const shift = random() * 512;
  const wrackWidth = between(random, 15, 30);
  const wrackAt = between(random, 70, 105);
  const hasWater = random() < 0.62;
  const centre = hasWater ? wrackAt - between(random, 12, 34) : wrackAt + between(random, -22, 28);
  const along = (x: number, y: number) => (x - cx) * -uy + (y - cy) * ux;
  const inland = (x: number, y: number) => {
    const s = centre + (x - cx) * ux + (y - cy) * uy;
    const a = along(x, y);
    return s + 17 * tap(CLOUD, a * 0.55 + shift, shift) + 5 * tap(CLOUD_TOO, a * 2.2 + shift, s * 0.3);
  };
  return { inland, along, wrackAt, wrackWidth, hasWater };
}

/** 0..1: how thick the weed lies at a distance inland. */
export function wrackDensity({ wrackAt, wrackWidth }: Beach, inlandCm: number, alongCm: number): number {
  const off = (inlandCm - wrackAt) / wrackWidth;
  if (off * off > 4) return 0;
  const clump = 0.85 + 0.9 * tap(CLOUD, alongCm * 0.9 + 77, inlandCm * 1.1);
  return Math.max(0, Math.min(1, Math.exp(-off * off * 1.6) * clump));
}

/** Height of the sand, cm: its slope, ripples, hollows, and the heap under the weed. */
export function terrain(
  beach: Beach,
  { ground, seed }: { ground: Ground; seed: number },
  random: Random,
): (x: number, y: number) => number {
  const shift = random() * 512;
  const rippleCm = between(random, 5, 8.5);
  const rippleHeight = between(random, 0.12, 0.34);
  const dune = between(random, 0.8, 2);
  const lumps = ground === "shingle" ? 1.6 : 1;
  return (x, y) => {
    const s = beach.inland(x, y);
    const dry = ramp(beach.wrackAt - 15, beach.wrackAt + 40, s);
    const slopeDown = s < 0 ? s * 0.09 : s * 0.015;
    const warp = 11 * tap(CLOUD, x * 0.8 + shift, y * 0.8) + 2.5 * tap(CLOUD_TOO, x * 3, y * 3 + shift);
    const phase = ((s + warp) * 2 * Math.PI) / rippleCm;
    const ripple =
      (Math.sin(phase) + 0.25 * Math.sin(2 * phase + 0.8)) *
      rippleHeight *
      ramp(-0.5, 0.5, tap(CLOUD, x * 0.5 + 200, y * 0.5 + shift)) *
      (s < 6 ? 0.35 : 1) *
      mix(0.75, 1, dry);
    const hills = dune * tap(CLOUD_TOO, x * 0.7 + shift, y * 0.7) * (0.4 + 0.6 * dry);
    const churned =
      (0.25 + 0.45 * dry) * lumps * tap(CLOUD, x * 5.5, y * 5.5 + seed) * 0.42 +
      0.05 * tap(GRIT, x * 9, y * 9);
    const heap = 2.4 * wrackDensity(beach, s, beach.along(x, y));
    return slopeDown + ripple + hills + churned + heap;
  };
}
