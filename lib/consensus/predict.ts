import type { Estimate } from "./types";

/** Coefficients of the predicted IoU; fitted on simulated batches by `npm run bench:consensus -- --fit`. */
export const IOU_MODEL = { constant: 0.25, pair: 0.9, count: 0.35 };

const logit = (p: number) => Math.log(p / (1 - p));
const expit = (x: number) => 1 / (1 + Math.exp(-x));
const clamp = (p: number) => Math.min(0.995, Math.max(0.02, p));

/**
 * Expected IoU with the truth of a shape fused from `count` independent drawings whose mean pairwise IoU is
 * `pairIou` (for one drawing: what another by a like person would give). `shift` comes from gold images.
 * A logistic model: agreement between people is no proof, so the fit is against known truth.
 */
export function predictIou(pairIou: number, count: number, shift = 0): number {
  const { constant, pair, count: perCount } = IOU_MODEL;
  return expit(constant + pair * logit(clamp(pairIou)) + perCount * Math.log(Math.max(1, count)) + shift);
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

/** Spread of the true IoU about the predicted one, as a standard deviation. */
const IOU_DEVIATION = 0.07;

/**
 * Expected panoptic quality (Kirillov et al., 2019) of labels about which only probabilities are known:
 * the sum of expected IoU over expected true positives plus half of the expected errors. `unseen` is the
 * number of objects that nobody drew, in expectation. The interval takes objects as independent, and
 * is 95 % by the normal approximation. 1 for an image with nothing in it and nothing drawn.
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
  const half = 1.96 * Math.sqrt(variance);
  return { value, low: Math.max(0, value - half), high: Math.min(1, value + half) };
}
