import type { Interval } from "./types";

/**
 * Percentile interval of figures under resampling of images with replacement (Efron, 1979): each round hands a draw of
 * image numbers to `measure`, and the middle 95 % of each figure over the rounds comes back. Undefined for
 * fewer than two images or where a figure is undefined in most rounds. The same seed gives the same interval.
 */
export function bootstrapIntervals<Figure extends string>(
  imageCount: number,
  figures: readonly Figure[],
  measure: (images: Int32Array) => { readonly [figure in Figure]: number | undefined },
  { rounds = 1000, seed = 1 }: { rounds?: number; seed?: number } = {},
): { readonly [figure in Figure]: Interval | undefined } {
  const values = new Map<Figure, number[]>(figures.map((figure) => [figure, []]));
  const draw = new Int32Array(imageCount);
  const next = mulberry32(seed);
  for (let round = 0; round < rounds && imageCount >= 2; round++) {
    for (let i = 0; i < imageCount; i++) draw[i] = Math.floor(next() * imageCount);
    const measured = measure(draw);
    for (const figure of figures) {
      const value = measured[figure];
      if (value !== undefined) values.get(figure)?.push(value);
    }
  }
  const entries = figures.map((figure) => [figure, middle(values.get(figure) ?? [], rounds)] as const);
  return Object.fromEntries(entries) as { readonly [figure in Figure]: Interval | undefined };
}

function middle(values: readonly number[], rounds: number): Interval | undefined {
  if (values.length < Math.max(2, rounds / 2)) return undefined;
  const sorted = values.toSorted((p, q) => p - q);
  return { low: quantile(sorted, 0.025), high: quantile(sorted, 0.975) };
}

/** Linear interpolation between order statistics (Hyndman and Fan, 1996, type 7). */
function quantile(sorted: readonly number[], share: number): number {
  const at = (sorted.length - 1) * share;
  const low = sorted[Math.floor(at)] ?? NaN;
  const high = sorted[Math.ceil(at)] ?? NaN;
  return low + (high - low) * (at - Math.floor(at));
}

/** Uniform in [0, 1). Source: T. Ettinger, mulberry32, 2017. */
function mulberry32(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = Math.imul(state ^ (state >>> 15), state | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) / 4_294_967_296;
  };
}
