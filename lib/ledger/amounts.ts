import { invariant, InvariantError } from "@/lib/errors";

/** The one currency at first, with its exponent of ISO 4217 (two digits: cents). */
export const CURRENCY = "usd";
export const MINOR_UNITS_PER_UNIT = 100;

/** Throws InvariantError unless the value is a whole, safe number of cents. */
export function requireCents(value: number, what: string): number {
  if (!Number.isSafeInteger(value))
    throw new InvariantError(`${what} is not a whole number of cents: ${value}`);
  return value;
}

/** Throws InvariantError unless the value is a whole number of cents, zero or more. */
export function requireNonNegative(value: number, what: string): number {
  if (requireCents(value, what) < 0) throw new InvariantError(`${what} is negative: ${value}`);
  return value;
}

/**
 * Splits `totalCents` by weights so that the shares are whole cents and sum exactly to the total (largest
 * remainder, ties to the earlier key in sorted order, so the result does not depend on the order given).
 * Weights are finite, not negative and not all zero; otherwise RangeError. O(n log n).
 */
export function splitCents(totalCents: number, weights: ReadonlyMap<string, number>): Map<string, number> {
  requireNonNegative(totalCents, "the total");
  const sorted = [...weights].sort(([a], [b]) => (a < b ? -1 : 1));
  const sum = sorted.reduce((total, [, weight]) => total + weight, 0);
  if (!(sum > 0) || sorted.some(([, weight]) => !(weight >= 0))) {
    throw new RangeError("weights must not be negative, and not all zero");
  }
  if (!Number.isFinite(sum * Math.max(totalCents, 1))) throw new RangeError("weights are too large");
  const shares = sorted.map(([key, weight]) => {
    const exact = (totalCents * weight) / sum;
    return { key, cents: Math.floor(exact), remainder: exact - Math.floor(exact) };
  });
  let left = totalCents - shares.reduce((total, share) => total + share.cents, 0);
  for (const share of [...shares].sort((a, b) => b.remainder - a.remainder)) {
    if (left === 0) break;
    share.cents += 1;
    left -= 1;
  }
  // Rounding of the exact shares could reach a whole cent only for totals near 2^53.
  invariant(left === 0, `a split of ${totalCents} left ${left} cents`);
  return new Map(shares.map(({ key, cents }) => [key, cents]));
}
