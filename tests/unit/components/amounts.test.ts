import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { exponentOf, formatMoney, parseAmount, toAmountText } from "@/components/ui/amounts";

describe("an amount as a person types it", () => {
  it.each([
    ["12", 1200],
    ["12.5", 1250],
    ["12.50", 1250],
    [".5", 50],
    ["0", 0],
    [" $1,250.00 ", 125000],
    ["USD 7", 700],
    ["1234567", 123456700],
    ["0.29", 29], // 0.29 * 100 is 28.999999999999996 in binary floating point
    ["4.35", 435], // 4.35 * 100 is 434.99999999999994
  ])("%j is %i cents", (text, cents) => {
    expect(parseAmount(text)).toBe(cents);
  });

  it.each([
    "",
    ".",
    "12.345",
    "1,25",
    "12,50",
    "1,2345",
    "-3",
    "1e3",
    "ten",
    "12 50",
    "99999999999999999999",
  ])("%j is not an amount", (text) => {
    expect(parseAmount(text)).toBeUndefined();
  });

  // ISO 4217: JPY has exponent 0, KWD has exponent 3.
  it("follows the currency's own number of digits", () => {
    expect([exponentOf("USD"), exponentOf("JPY"), exponentOf("KWD")]).toEqual([2, 0, 3]);
    expect(parseAmount("500", "JPY")).toBe(500);
    expect(parseAmount("500.5", "JPY")).toBeUndefined();
    expect(parseAmount("1.234", "KWD")).toBe(1234);
  });
});

it("comes back exactly from the text of any whole number of cents", () => {
  fc.assert(
    fc.property(fc.nat(Number.MAX_SAFE_INTEGER), fc.constantFrom("USD", "JPY", "KWD"), (cents, currency) => {
      expect(parseAmount(toAmountText(cents, currency), currency)).toBe(cents);
    }),
  );
});

describe("money for reading", () => {
  it.each([
    [125000, {}, "$1,250.00"],
    [5, {}, "$0.05"],
    [-3456, {}, "\u2212$34.56"],
    [3456, { signed: true }, "+$34.56"],
    [0, { signed: true }, "$0.00"],
    [9007199254740991, {}, "$90,071,992,547,409.91"],
    [500, { currency: "JPY" }, "¥500"],
  ] as const)("%i with %j is %s", (cents, options, text) => {
    expect(formatMoney(cents, options)).toBe(text);
  });
});
