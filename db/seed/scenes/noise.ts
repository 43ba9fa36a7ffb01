/** A hash of lattice coordinates and a seed to [0, 1); the same on every machine (integer arithmetic only). */
export function hash(x: number, y: number, seed: number): number {
  let h = Math.imul(x | 0, 374761393) ^ Math.imul(y | 0, 668265263) ^ Math.imul(seed | 0, 2147483647);
  h = Math.imul(h ^ (h >>> 13), 1274126177);
  h ^= h >>> 16;
  return (h >>> 0) / 4294967296;
}

const smooth = (t: number) => t * t * (3 - 2 * t);

/** Value noise in [0, 1], smooth between lattice points one unit apart. */
export function noise(x: number, y: number, seed: number): number {
  const x0 = Math.floor(x);
  const y0 = Math.floor(y);
  const u = smooth(x - x0);
  const v = smooth(y - y0);
  const top = hash(x0, y0, seed) * (1 - u) + hash(x0 + 1, y0, seed) * u;
  const bottom = hash(x0, y0 + 1, seed) * (1 - u) + hash(x0 + 1, y0 + 1, seed) * u;
  return top * (1 - v) + bottom * v;
}

/** Octaves of value noise, each twice as fine and half as strong; in [0, 1]. */
export function fractal(x: number, y: number, seed: number, octaves: number): number {
  let sum = 0;
  let weight = 0;
  let strength = 1;
  for (let octave = 0; octave < octaves; octave++) {
    sum += strength * noise(x, y, seed + octave * 101);
    weight += strength;
    strength /= 2;
    x *= 2.03;
    y *= 2.03;
  }
  return sum / weight;
}

export type Random = () => number;

/** A generator of numbers in [0, 1) from a seed (mulberry32, public domain, from memory). */
export function randomFrom(seed: number): Random {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = state;
    t = Math.imul(t ^ (t >>> 15), t | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
  };
}
