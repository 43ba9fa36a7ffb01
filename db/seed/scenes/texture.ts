import { hash, randomFrom } from "./random";

/** A square of numbers that repeats without a seam. Its side is a power of two. */
export type Tile = { readonly size: number; readonly values: Float32Array };

/** Value of a tile at a place in texels, between texels by straight lines; the tile repeats in both directions. */
export function tap({ size, values }: Tile, x: number, y: number): number {
  const column = Math.floor(x);
  const row = Math.floor(y);
  const u = x - column;
  const v = y - row;
  const mask = size - 1;
  const left = column & mask;
  const right = (column + 1) & mask;
  const top = (row & mask) * size;
  const bottom = ((row + 1) & mask) * size;
  const above = values[top + left]! * (1 - u) + values[top + right]! * u;
  const below = values[bottom + left]! * (1 - u) + values[bottom + right]! * u;
  return above * (1 - v) + below * v;
}

/** 0 below `from`, 1 above `to`, smooth between. `from` may be the larger one, which turns it round. */
export function ramp(from: number, to: number, value: number): number {
  const t = Math.min(1, Math.max(0, (value - from) / (to - from)));
  return t * t * (3 - 2 * t);
}

export function mix(from: number, to: number, share: number): number {
  return from + (to - from) * share;
}

const SIZE = 512;
const BUBBLE_SIZE = 256;

/** Fractal noise around 0, about -1..1: clouds of 64 texels down to single texels. */
export const CLOUD: Tile = fractalTile(8, 7, 0.55, 1);
/** As CLOUD from another seed, for warping and for a second layer that must not follow the first. */
export const CLOUD_TOO: Tile = fractalTile(8, 7, 0.55, 2);
/** Fine fractal noise around 0, about -1..1: lumps of 8 texels and smaller. */
export const GRIT: Tile = fractalTile(64, 4, 0.7, 3);
/** Distance to the nearest of scattered points, about 0..1 (Worley, 1996); cells of about 13 texels. */
export const CELL: Tile = cellTile((first) => first);
/** How much farther the second nearest point is: 0 along the seams of cells. */
export const SEAM: Tile = cellTile((first, second) => second - first);

function fractalTile(cells: number, octaves: number, gain: number, seed: number): Tile {
  const values = new Float32Array(SIZE * SIZE);
  let strength = 1;
  let power = 0;
  for (let octave = 0; octave < octaves; octave++) {
    addOctave(values, cells << octave, strength, seed * 131 + octave);
    power += strength * strength;
    strength *= gain;
  }
  // Lattice values are even in -1..1; smoothing leaves a spread of about 0.45 for each octave.
  const scale = 1.1 / Math.sqrt(power);
  for (let i = 0; i < values.length; i++) values[i]! *= scale;
  return { size: SIZE, values };
}

function addOctave(values: Float32Array, cells: number, strength: number, seed: number): void {
  const step = cells / SIZE;
  for (let y = 0; y < SIZE; y++) {
    const row = Math.floor(y * step);
    const fy = y * step - row;
    const v = fy * fy * (3 - 2 * fy);
    const below = (row + 1) % cells;
    for (let x = 0; x < SIZE; x++) {
      const column = Math.floor(x * step);
      const fx = x * step - column;
      const u = fx * fx * (3 - 2 * fx);
      const right = (column + 1) % cells;
      const above = hash(column, row, seed) * (1 - u) + hash(right, row, seed) * u;
      const under = hash(column, below, seed) * (1 - u) + hash(right, below, seed) * u;
      values[y * SIZE + x]! += strength * (2 * (above * (1 - v) + under * v) - 1);
    }
  }
}

function cellTile(measure: (first: number, second: number) => number): Tile {
  const side = 20;
  const random = randomFrom(77);
  const jitter = Float32Array.from({ length: side * side * 2 }, () => random());
  const values = new Float32Array(BUBBLE_SIZE * BUBBLE_SIZE);
  for (let y = 0; y < BUBBLE_SIZE; y++) {
    for (let x = 0; x < BUBBLE_SIZE; x++) {
      const px = (x / BUBBLE_SIZE) * side;
      const py = (y / BUBBLE_SIZE) * side;
      let first = 9;
      let second = 9;
      for (let row = Math.floor(py) - 1; row <= Math.floor(py) + 1; row++) {
        for (let column = Math.floor(px) - 1; column <= Math.floor(px) + 1; column++) {
          const at = (((row + side) % side) * side + ((column + side) % side)) * 2;
          const distance = Math.hypot(column + jitter[at]! - px, row + jitter[at + 1]! - py);
          if (distance < first) {
            second = first;
            first = distance;
          } else if (distance < second) second = distance;
        }
      }
      values[y * BUBBLE_SIZE + x] = measure(first, second);
    }
  }
  return { size: BUBBLE_SIZE, values };
}
