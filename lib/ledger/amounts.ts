import { InvariantError } from "@/lib/errors";

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
 * Weights are not negative and not all zero; otherwise RangeError. O(n log n).
 */
export function splitCents(totalCents: number, weights: ReadonlyMap<string, number>): Map<string, number> {
  requireNonNegative(totalCents, "the total");
  const keys = [...weights.keys()].sort();
  const sum = keys.reduce((total, key) => total + (weights.get(key) ?? 0), 0);
  if (!(sum > 0) || keys.some((key) => !((weights.get(key) ?? -1) >= 0))) {
    throw new RangeError("weights must not be negative, and not all zero");
  }
  const exact = keys.map((key) => ({ key, share: (totalCents * (weights.get(key) ?? 0)) / sum }));
  const shares = new Map(exact.map(({ key, share }) => [key, Math.floor(share)]));
  let left = totalCents - [...shares.values()].reduce((total, share) => total + share, 0);
  const byRemainder = [...exact].sort(
    (a, b) => b.share - Math.floor(b.share) - (a.share - Math.floor(a.share)),
  );
  for (const { key } of byRemainder) {
    if (left === 0) break;
    shares.set(key, (shares.get(key) ?? 0) + 1);
    left -= 1;
  }
  return shares;
}
