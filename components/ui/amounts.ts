/** Currency of the product where none is given (ISO 4217). */
export const DEFAULT_CURRENCY = "USD";

/** Digits after the point of a currency, as the platform's locale data has them (ISO 4217 exponent). */
export function exponentOf(currency: string): number {
  return (
    new Intl.NumberFormat("en", { style: "currency", currency }).resolvedOptions().maximumFractionDigits ?? 2
  );
}

/**
 * Reads an amount as a person types it ("12", "12.5", "$1,250.00") into whole minor units, digit by digit, so
 * that no binary fraction is involved. Undefined when it is not an amount or has more digits than the
 * currency; commas are read as thousands separators and must stand where those do.
 */
export function parseAmount(text: string, currency: string = DEFAULT_CURRENCY): number | undefined {
  const exponent = exponentOf(currency);
  const match = /^\s*(?:[A-Z]{3}|[$€£¥])?\s*(\d{1,3}(?:,\d{3})+|\d+)?(?:\.(\d*))?\s*$/.exec(text);
  if (!match) return undefined;
  const whole = match[1]?.replaceAll(",", "") ?? "";
  const fraction = match[2] ?? "";
  if (whole + fraction === "" || fraction.length > exponent) return undefined;
  const minorUnits = Number((whole || "0") + fraction.padEnd(exponent, "0"));
  return Number.isSafeInteger(minorUnits) ? minorUnits : undefined;
}

/** Whole minor units as plain digits for an input: 1250 is "12.50". Exact for every safe integer. */
export function toAmountText(cents: number, currency: string = DEFAULT_CURRENCY): string {
  const exponent = exponentOf(currency);
  const sign = cents < 0 ? "-" : "";
  const digits = String(Math.abs(cents)).padStart(exponent + 1, "0");
  if (exponent === 0) return sign + digits;
  return `${sign}${digits.slice(0, -exponent)}.${digits.slice(-exponent)}`;
}

type FormatOptions = { currency?: string; signed?: boolean };

/**
 * Whole minor units as money for reading: 125000 is "$1,250.00". The digits go to Intl as a decimal string,
 * so nothing is divided. `signed` puts a plus before gains; the minus is U+2212, as wide as the plus.
 */
export function formatMoney(cents: number, options: FormatOptions = {}): string {
  const { currency = DEFAULT_CURRENCY, signed = false } = options;
  const format = new Intl.NumberFormat("en", { style: "currency", currency, signDisplay: "never" });
  const sign = cents < 0 ? "\u2212" : signed && cents > 0 ? "+" : "";
  return sign + format.format(decimalOf(toAmountText(cents, currency)));
}

function decimalOf(text: string): Intl.StringNumericLiteral {
  return text as Intl.StringNumericLiteral;
}
