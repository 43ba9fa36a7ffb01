import { IOU_MODEL, iouLogit } from "./predict";
import type { ImageConsensus, Reliability, Verdict } from "./types";

/** Share of the doubt about existence and class that one more label removes; measured on simulated pools. */
const DOUBT_REMOVED = 0.6;

/**
 * What one more label of an image is expected to add to its panoptic quality, 0..1: sharper outlines by the
 * coefficient of the predicted IoU on the number of drawings, and less doubt about what is there. Falls
 * with every label, so a rule that stops below a threshold always stops.
 */
export function expectedGain({ agreed, predictedQuality }: ImageConsensus): number {
  if (agreed.length === 0) return (1 - predictedQuality.value) * DOUBT_REMOVED;
  let gain = 0;
  for (const { score, classProbability, predictedIou, support, members } of agreed) {
    const count = Math.max(1, support, members.length);
    const logit = iouLogit(predictedIou) + IOU_MODEL.count * Math.log((count + 1) / count);
    const sharper = 1 / (1 + Math.exp(-logit)) - predictedIou;
    const right = score * classProbability;
    gain += right * Math.max(0, sharper) + (1 - right) * DOUBT_REMOVED * predictedIou;
  }
  const missing = Math.max(0, 1 - predictedQuality.value - meanLoss(agreed));
  return Math.min(1, gain / agreed.length + missing * DOUBT_REMOVED * 0.5);
}

function meanLoss(agreed: ImageConsensus["agreed"]): number {
  return agreed.reduce((sum, { predictedIou }) => sum + 1 - predictedIou, 0) / agreed.length;
}

/**
 * Who is worth asking: the `share` (0..1) of known annotators with the highest expected quality, without those who
 * copy, and everybody of whom nothing is known yet. Redundancy spent on people who are often wrong is what makes
 * many labels necessary.
 */
export function invitedFrom(reliability: Reliability, share: number): (annotatorId: string) => boolean {
  const qualities = Object.values(reliability.annotators)
    .map(({ quality }) => quality)
    .sort((a, b) => b - a);
  const cut = share >= 1 ? 0 : (qualities[Math.floor(qualities.length * share)] ?? 0);
  return (annotatorId) => {
    const known = reliability.annotators[annotatorId];
    return !known || share >= 1 || (known.quality >= cut && known.copyOf === null);
  };
}

export type StopRule = {
  /** Quality from which an image needs no more labels; 0..1. */
  target: number;
  /** What one point (0.01) of quality on one image is worth to the requester, in cents. */
  pointCents: number;
  /** What one more label costs, with fees, in cents. */
  labelCents: number;
  kMin: number;
  kMax: number;
};

export type StopDecision = { verdict: Verdict; gain: number; reason: string };

/**
 * Whether one more label is worth its money: it is asked for while the quality is below the target and the
 * expected gain is worth at least its cost. At kMax an image below the target is split.
 */
export function decideRedundancy(consensus: ImageConsensus, labels: number, rule: StopRule): StopDecision {
  const gain = expectedGain(consensus);
  const quality = consensus.predictedQuality.value;
  const worthCents = 100 * gain * rule.pointCents;
  const figures =
    `expected quality ${(100 * quality).toFixed(0)} of ${(100 * rule.target).toFixed(0)}; one more label costs ` +
    `${rule.labelCents} cents and is expected to add ${(100 * gain).toFixed(1)} points, worth ${worthCents.toFixed(0)} cents`;
  if (labels < rule.kMin)
    return { verdict: "short", gain, reason: `At least ${rule.kMin} labels are needed.` };
  if (quality >= rule.target) return { verdict: "settled", gain, reason: `Good enough: ${figures}.` };
  if (labels >= rule.kMax)
    return { verdict: "split", gain, reason: `No more labels are asked for: ${figures}.` };
  if (worthCents < rule.labelCents)
    return { verdict: "settled", gain, reason: `Not worth another label: ${figures}.` };
  return { verdict: "short", gain, reason: `Worth another label: ${figures}.` };
}

/** What is stored of an image's consensus for the forecast. */
export type ForecastImage = { agreement: number; labels: number };

export type Forecast = {
  target: number;
  settled: number;
  short: number;
  split: number;
  /** Labels still to be asked for until every image is settled or has kMax, in expectation. */
  labelsToCome: number;
  costCents: number;
};

/**
 * What a change of the agreement target would settle and cost, for each target. An image below it is expected to
 * gain as one whose disagreement shrinks with the number of labels: 1 - agreement falls as 1 / labels.
 * O(images x targets x kMax).
 */
export function forecastTargets(
  images: readonly ForecastImage[],
  targets: readonly number[],
  rule: { labelCents: number; kMin: number; kMax: number },
): Forecast[] {
  return targets.map((target) => {
    const forecast: Forecast = { target, settled: 0, short: 0, split: 0, labelsToCome: 0, costCents: 0 };
    for (const { agreement, labels } of images) {
      if (labels >= rule.kMin && agreement >= target) forecast.settled++;
      else if (labels >= rule.kMax) forecast.split++;
      else {
        forecast.short++;
        let needed = Math.max(labels + 1, rule.kMin);
        const doubt = (1 - agreement) * Math.max(1, labels);
        while (needed < rule.kMax && 1 - doubt / needed < target) needed++;
        forecast.labelsToCome += needed - labels;
      }
    }
    forecast.costCents = forecast.labelsToCome * rule.labelCents;
    return forecast;
  });
}
