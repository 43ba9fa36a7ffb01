/** Numbers in [0, 1), one after the other. */
export type Random = () => number;

/** A generator from a seed (mulberry32, public domain; from memory). Integer arithmetic, so it is the same everywhere. */
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

/** A hash of lattice coordinates and a seed to [0, 1). */
export function hash(x: number, y: number, seed: number): number {
  let h = Math.imul(x | 0, 374761393) ^ Math.imul(y | 0, 668265263) ^ Math.imul(seed | 0, 1442695041);
  h = Math.imul(h ^ (h >>> 13), 1274126177);
  h = Math.imul(h ^ (h >>> 15), 0x2c1b3c6d);
  h ^= h >>> 16;
  return (h >>> 0) / 4294967296;
}

/** A number in [low, high). */
export function between(random: Random, low: number, high: number): number {
  return low + (high - low) * random();
}

/** A whole number in [low, high], both included. */
export function wholeBetween(random: Random, low: number, high: number): number {
  return low + Math.floor(random() * (high - low + 1));
}

/** A number in (-1, 1), more often near 0: the sum of three even ones. */
export function nearZero(random: Random): number {
  return ((random() + random() + random()) / 3) * 2 - 1;
}

/** One of a list that is not empty. */
export function pick<T>(list: readonly [T, ...T[]], random: Random): T {
  return list[Math.floor(random() * list.length)] ?? list[0];
}

/** One of a list with weights, the weights being positive. */
export function pickWeighted<T>(
  list: readonly [readonly [T, number], ...(readonly [T, number])[]],
  random: Random,
): T {
  let at = random() * list.reduce((sum, [, weight]) => sum + weight, 0);
  return (list.find(([, weight]) => (at -= weight) < 0) ?? list[0])[0];
}
