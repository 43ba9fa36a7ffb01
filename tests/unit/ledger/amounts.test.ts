import { describe, expect, it } from "vitest";
import { InvariantError } from "@/lib/errors";
import {
  formatUsd,
  minorUnitDigits,
  requireCents,
  requireNonNegative,
  splitCents,
  toDecimal,
} from "@/lib/ledger/amounts";

describe("an amount", () => {
  it.each([0.5, Number.NaN, Number.POSITIVE_INFINITY, Number.MAX_SAFE_INTEGER + 1])(
    "is never %s cents",
    (value) => {
      expect(() => requireCents(value, "it")).toThrow(InvariantError);
    },
  );

  it("may be negative where it is a movement and not where it is held", () => {
    expect(requireCents(-1, "it")).toBe(-1);
    expect(requireNonNegative(0, "it")).toBe(0);
    expect(() => requireNonNegative(-1, "it")).toThrow(InvariantError);
  });
});

describe("an amount in words of its currency (ISO 4217 minor units)", () => {
  it.each([
    [123456, "usd", "1234.56"],
    [-5, "USD", "-0.05"],
    [0, "eur", "0.00"],
    [500, "jpy", "500"],
    [-500, "jpy", "-500"],
    [1234, "kwd", "1.234"],
    [Number.MAX_SAFE_INTEGER, "usd", "90071992547409.91"],
  ])("%d of %s is %s", (minorUnits, currency, text) => {
    expect(toDecimal(minorUnits, currency)).toBe(text);
  });

  it("is not guessed for a currency that is not known", () => {
    expect(() => minorUnitDigits("zzz")).toThrow(RangeError);
    expect(() => toDecimal(0.5)).toThrow(InvariantError);
  });

  it.each([
    [0, "$0.00"],
    [99, "$0.99"],
    [123456789, "$1,234,567.89"],
    [-123456, "-$1,234.56"],
  ])("%d cents reads %s", (cents, text) => {
    expect(formatUsd(cents)).toBe(text);
  });
});

describe("a split", () => {
  const weights = (entries: Record<string, number>) => new Map(Object.entries(entries));

  it("gives the cents that are left to the largest remainders (Hamilton's method, worked by hand)", () => {
    // 100 cents over 3 : 3 : 1 is 42.857, 42.857 and 14.286: floors 42, 42, 14 leave two cents for a and b.
    expect([...splitCents(100, weights({ c: 1, b: 3, a: 3 }))]).toEqual([
      ["a", 43],
      ["b", 43],
      ["c", 14],
    ]);
  });

  it("breaks ties by key and not by the order given", () => {
    expect(Object.fromEntries(splitCents(1, weights({ b: 1, a: 1 })))).toEqual({ a: 1, b: 0 });
  });

  it("gives nothing for no weight and divides nothing into nothings", () => {
    expect(Object.fromEntries(splitCents(7, weights({ a: 0, b: 2 })))).toEqual({ a: 0, b: 7 });
    expect(Object.fromEntries(splitCents(0, weights({ a: 1, b: 2 })))).toEqual({ a: 0, b: 0 });
  });

  it.each([
    [{}],
    [{ a: 0 }],
    [{ a: -1, b: 2 }],
    [{ a: Number.NaN }],
    [{ a: Number.POSITIVE_INFINITY }],
    [{ a: 1e308, b: 1e308 }],
  ])("refuses the weights %o", (entries) => {
    expect(() => splitCents(10, weights(entries))).toThrow(RangeError);
  });

  it("refuses a negative or broken total", () => {
    expect(() => splitCents(-1, weights({ a: 1 }))).toThrow(InvariantError);
    expect(() => splitCents(0.1, weights({ a: 1 }))).toThrow(InvariantError);
  });
});
