import { describe, expect, it } from "vitest";
import { InvariantError } from "@/lib/errors";
import { feeFor, payFor, quote, type QuoteInput } from "@/lib/ledger/pricing";

const RATES = { baseCents: 5, boxCents: 3, polygonCents: 6, capCents: 40 };

describe("the pay of a submission", () => {
  it("is the base and the price of each agreed instance by its geometry", () => {
    expect(payFor(RATES, { agreedBoxes: 2, agreedPolygons: 3, goodFaith: true })).toBe(5 + 2 * 3 + 3 * 6);
  });

  it("is the base for good-faith work on an empty image", () => {
    expect(payFor(RATES, { agreedBoxes: 0, agreedPolygons: 0, goodFaith: true })).toBe(5);
  });

  it("is never above the cap, not even by the base", () => {
    expect(payFor(RATES, { agreedBoxes: 100, agreedPolygons: 0, goodFaith: true })).toBe(40);
    expect(payFor({ ...RATES, capCents: 2 }, { agreedBoxes: 0, agreedPolygons: 0, goodFaith: true })).toBe(2);
  });

  it("is nothing without good faith", () => {
    expect(payFor(RATES, { agreedBoxes: 9, agreedPolygons: 9, goodFaith: false })).toBe(0);
  });

  it.each([
    [{ ...RATES, capCents: -1 }, 0],
    [{ ...RATES, baseCents: -1 }, 0],
    [{ ...RATES, boxCents: 0.5 }, 1],
    [RATES, -1],
  ])("refuses rates %o with %d boxes", (rates, agreedBoxes) => {
    expect(() => payFor(rates, { agreedBoxes, agreedPolygons: 0, goodFaith: true })).toThrow(InvariantError);
  });
});

describe("the fee", () => {
  it.each([
    [100, 1500, 15],
    [99, 1500, 14], // 14.85 floored: rounding favours the requester
    [6, 1500, 0],
    [0, 1500, 0],
    [1, 10_000, 1],
    [9_007_199_254_740_991, 9999, 9_006_298_534_815_516], // beyond what a product of doubles holds exactly
  ])("on %d cents at %d basis points is %d cents", (payCents, feeBps, feeCents) => {
    expect(feeFor(payCents, feeBps)).toBe(feeCents);
  });

  it.each([-1, 10_001, 1.5])("is never %d basis points", (feeBps) => {
    expect(() => feeFor(100, feeBps)).toThrow(InvariantError);
  });
});

describe("a quote", () => {
  const batch: QuoteInput = {
    imageCount: 10,
    kMin: 2,
    kMax: 4,
    expectedInstances: 5,
    polygonShare: 0.2,
    pay: RATES,
    feeBps: 1500,
  };

  it("holds every image drawn by the most people at the cap, and the fee of each (worked by hand)", () => {
    // 40 tasks at 40 cents; each task's fee is 6 cents.
    expect(quote(batch)).toMatchObject({ worstCents: 1600, worstFeeCents: 240 });
  });

  it("expects the fewest people and a fifth of the possible extra ones (worked by hand)", () => {
    // 5 + 1 outline x 6 + 4 boxes x 3 = 23 cents a task; 10 x (2 + 0.4) = 24 tasks; 3 cents of fee each.
    expect(quote(batch)).toMatchObject({ expectedCents: 552, expectedFeeCents: 72 });
  });

  it("never expects more than the worst case, fee included, where each fee is floored to nothing", () => {
    const tiny = {
      ...batch,
      imageCount: 1000,
      kMin: 4,
      pay: { baseCents: 5, boxCents: 0, polygonCents: 0, capCents: 5 },
    };
    const { expectedCents, expectedFeeCents, worstCents, worstFeeCents } = quote(tiny);
    expect(worstFeeCents).toBe(0);
    expect(expectedCents + expectedFeeCents).toBeLessThanOrEqual(worstCents + worstFeeCents);
  });

  it("of no image costs nothing", () => {
    expect(quote({ ...batch, imageCount: 0 })).toEqual({
      expectedCents: 0,
      expectedFeeCents: 0,
      worstCents: 0,
      worstFeeCents: 0,
    });
  });

  it.each<Partial<QuoteInput>>([
    { imageCount: -1 },
    { imageCount: 1.5 },
    { kMin: 0 },
    { kMin: 5 },
    { kMax: 2.5 },
    { kMin: 1.5 },
  ])("refuses %o", (wrong) => {
    expect(() => quote({ ...batch, ...wrong })).toThrow(InvariantError);
  });
});
