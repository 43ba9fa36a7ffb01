import { invariant, InvariantError } from "@/lib/errors";

/** The one currency at first. */
export const CURRENCY = "usd";

/**
 * Digits after the point, by ISO 4217 (table A.1, column "minor unit"; values from memory): the currencies of
 * those who may pay by card here one day. Only USD is booked now.
 */
const MINOR_UNIT_DIGITS: Readonly<Record<string, number>> = {
  usd: 2,
  eur: 2,
  gbp: 2,
  chf: 2,
  cad: 2,
  aud: 2,
  jpy: 0,
  krw: 0,
  kwd: 3,
  bhd: 3,
};

/** Digits of a currency's minor unit: 2 for USD, 0 for JPY, 3 for KWD. RangeError for one that is not known. */
export function minorUnitDigits(currency: string): number {
  const digits = MINOR_UNIT_DIGITS[currency.toLowerCase()];
  if (digits === undefined) throw new RangeError(`the minor unit of ${currency} is not known`);
  return digits;
}

/** An amount of minor units as plain decimal text, exact at any size: 123456 in USD is "1234.56". */
export function toDecimal(minorUnits: number, currency: string = CURRENCY): string {
  const digits = minorUnitDigits(currency);
  const text = String(Math.abs(requireCents(minorUnits, "the amount"))).padStart(digits + 1, "0");
  const sign = minorUnits < 0 ? "-" : "";
  if (digits === 0) return sign + text;
  return `${sign}${text.slice(0, -digits)}.${text.slice(-digits)}`;
}

/** An amount of US cents as people read it: -123456 is "-$1,234.56". */
export function formatUsd(cents: number): string {
  const [whole = "", fraction = ""] = toDecimal(Math.abs(cents)).split(".");
  return `${cents < 0 ? "-" : ""}$${whole.replace(/\B(?=(\d{3})+$)/g, ",")}.${fraction}`;
}

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
