import type { Estimate } from "./types";

/** Coefficients of the predicted IoU; fitted on simulated batches by `npm run bench:consensus -- --fit`. */
export const IOU_MODEL = {
  constant: 1.031,
  pair: 0.0545,
  count: 0.6023,
  people: 0.1296,
  size: 0.1835,
  raggedness: -0.9774,
};

const logit = (p: number) => Math.log(p / (1 - p));
const expit = (x: number) => 1 / (1 + Math.exp(-x));
const clamp = (p: number) => Math.min(0.995, Math.max(0.02, p));

/** What is known of a fused shape without the truth. */
export type Fusion = {
  /** Mean pairwise IoU of the drawings; of a lone one, what another like it would be expected to give. */
  pairIou: number;
  /** Independent drawings. */
  count: number;
  /** Loss that the people's usual losses leave when their outlines are combined by inverse variance. */
  peopleLoss: number;
  /** Square root of the object's area, px: a hand's error of a pixel or two weighs more on a small object. */
  sizePx: number;
  /** Outline length over that of a circle of the same area; 1 or more. People cut the corners of ragged objects alike. */
  raggedness: number;
};

/** The terms of the logistic model, in the order of IOU_MODEL. */
export function iouTerms({ pairIou, count, peopleLoss, sizePx, raggedness }: Fusion): number[] {
  const size = Math.log(Math.min(100, Math.max(4, sizePx)) / 30);
  return [
    1,
    logit(clamp(pairIou)),
    Math.log(Math.max(1, count)),
    logit(clamp(1 - peopleLoss)),
    size,
    Math.log(Math.min(4, Math.max(1, raggedness))),
  ];
}

/**
 * Expected IoU with the truth of a fused shape: logistic in how far its drawings agree, how many there are
 * and how well their people usually draw. `shift` comes from gold images. Agreement between people is no
 * proof, so the coefficients are fitted against known truth.
 */
export function predictIou(fusion: Fusion, shift = 0): number {
  const { constant, pair, count, people, size, raggedness } = IOU_MODEL;
  const terms = iouTerms(fusion);
  const weights = [constant, pair, count, people, size, raggedness];
  return expit(terms.reduce((sum, term, k) => sum + term * weights[k]!, shift));
}

/** Loss of the inverse-variance combination of outlines with these losses. */
export function combinedLoss(losses: readonly number[]): number {
  if (losses.length === 0) return 0.5;
  let precision = 0;
  for (const loss of losses) precision += 1 / Math.max(0.005, loss) ** 2;
  return 1 / Math.sqrt(precision);
}

/** The inverse link, for fitting a shift. */
export function iouLogit(iou: number): number {
  return logit(clamp(iou));
}

/**
 * Reliability of the mean of `count` drawings that resemble each other by `pairIou`: how far another group of
 * the same size would confirm it; 0..1 (Spearman, 1910; Brown, 1910).
 */
export function stepUp(pairIou: number, count: number): number {
  const p = Math.min(1, Math.max(0, pairIou));
  return (count * p) / (1 + (count - 1) * p);
}

/** One possible object in the sum: P(real and of the class given), whether it is in the labels, expected IoU. */
export type Expected = { right: number; real: number; included: boolean; iou: number };

/** Errors of one image go together (a bad annotator, a hard scene); measured on simulated pools. */
const OVERDISPERSION = 1.7;

/** Spread of the true IoU about the predicted one, as a standard deviation. */
const IOU_DEVIATION = 0.07;

/**
 * Expected panoptic quality (Kirillov et al., 2019) of labels about which only probabilities are known:
 * the sum of expected IoU over expected true positives plus half of the expected errors. `unseen` is the
 * number of objects that nobody drew, in expectation. The interval takes objects as independent, and
 * is 95 % by the normal approximation, widened by the overdispersion measured. 1 for an image with nothing in it and nothing drawn.
 */
export function expectedQuality(objects: readonly Expected[], unseen: number): Estimate {
  let overlap = 0;
  let denominator = unseen / 2;
  for (const { right, real, included, iou } of objects) {
    if (included) {
      overlap += right * iou;
      // Right: 1. Wrong class of a real object: half for each of the two errors. Not real: half.
      denominator += right + (real - right) + (1 - real) / 2;
    } else denominator += real / 2;
  }
  if (denominator < 1e-9) return { value: 1, low: 1, high: 1 };
  const value = overlap / denominator;
  let variance = 0;
  for (const { right, real, included, iou } of objects) {
    // Delta method: how far one object moves the quotient when it turns out right or wrong.
    const gain = included ? (iou - value / 2) / denominator : value / 2 / denominator;
    const p = included ? right : real;
    variance += gain * gain * p * (1 - p);
    if (included) variance += (right * IOU_DEVIATION ** 2) / denominator ** 2;
  }
  variance += (value / 2 / denominator) ** 2 * unseen;
  const half = 1.96 * OVERDISPERSION * Math.sqrt(variance);
  return { value, low: Math.max(0, value - half), high: Math.min(1, value + half) };
}
