import { invariant } from "@/lib/errors";
import { requireNonNegative } from "./amounts";

/** What a submission is paid by, in cents. */
export type PayRates = { baseCents: number; boxCents: number; polygonCents: number; capCents: number };

/** What of a submission counts. */
export type AgreedWork = { agreedBoxes: number; agreedPolygons: number; goodFaith: boolean };

/**
 * Pay of one submission for one image, in whole cents: the base for good-faith work, plus the price of each
 * agreed instance by geometry, never above the cap. 0 without good faith.
 */
export function payFor(rates: PayRates, { agreedBoxes, agreedPolygons, goodFaith }: AgreedWork): number {
  requireNonNegative(rates.capCents, "the cap");
  if (!goodFaith) return 0;
  const earned =
    requireNonNegative(rates.baseCents, "the base") +
    requireNonNegative(agreedBoxes * rates.boxCents, "pay for boxes") +
    requireNonNegative(agreedPolygons * rates.polygonCents, "pay for outlines");
  return Math.min(earned, rates.capCents);
}

/** The platform's fee on top of a pay, floored to a whole cent: rounding favours the requester. `feeBps` is 0..10,000. */
export function feeFor(payCents: number, feeBps: number): number {
  requireNonNegative(payCents, "the pay");
  invariant(
    Number.isInteger(feeBps) && feeBps >= 0 && feeBps <= 10_000,
    "the fee is 0 to 10,000 basis points",
  );
  return Number((BigInt(payCents) * BigInt(feeBps)) / 10_000n);
}

export type QuoteInput = {
  imageCount: number;
  kMin: number;
  kMax: number;
  /** Objects on an image, a guess or a measured mean; only the expected cost depends on it. */
  expectedInstances: number;
  /** Share of the objects that are outlines, 0..1. */
  polygonShare: number;
  pay: PayRates;
  feeBps: number;
};

/** Pay and fee of a batch in cents. */
export type Quote = {
  expectedCents: number;
  expectedFeeCents: number;
  worstCents: number;
  worstFeeCents: number;
};

/** Annotators asked beyond the fewest, as a share of what is possible, before a batch has measured it. */
const EXTRA_SHARE = 0.2;

/**
 * What a batch costs. The worst case is every image drawn by kMax people, each at the cap, and its fee; since
 * each pay is at most the cap and the fee of each is floored, no bill exceeds it. It is what gets held.
 */
export function quote({
  imageCount,
  kMin,
  kMax,
  expectedInstances,
  polygonShare,
  pay,
  feeBps,
}: QuoteInput): Quote {
  invariant(Number.isInteger(imageCount) && imageCount >= 0, "images are counted");
  invariant(
    Number.isInteger(kMin) && Number.isInteger(kMax) && kMin >= 1 && kMax >= kMin,
    "1 <= kMin <= kMax",
  );
  const worstTasks = imageCount * kMax;
  const polygons = expectedInstances * polygonShare;
  const typicalCents = Math.min(
    pay.capCents,
    pay.baseCents + polygons * pay.polygonCents + (expectedInstances - polygons) * pay.boxCents,
  );
  const expectedTasks = imageCount * (kMin + (kMax - kMin) * EXTRA_SHARE);
  const expectedCents = Math.round(expectedTasks * typicalCents);
  return {
    expectedCents,
    // The fee of each task is floored, as it will be when it is charged: of the whole it could exceed the worst case.
    expectedFeeCents: Math.round(expectedTasks * feeFor(Math.round(typicalCents), feeBps)),
    worstCents: requireNonNegative(worstTasks * pay.capCents, "the worst case"),
    worstFeeCents: requireNonNegative(worstTasks * feeFor(pay.capCents, feeBps), "the worst fee"),
  };
}
