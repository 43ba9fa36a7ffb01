import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";

/** What people or an agreed result said of one proposal. */
export type Judged = { source: string; score: number; isKept: boolean };

/** Turns the score that an engine gave into the probability that people of this batch keep the proposal. */
export type Calibration = (score: number, source: string) => number;

/** An agreed object and a proposal are one from this overlap on: adjusting then takes less than drawing. */
const SAME_IOU = 0.5;
/** Spreads of the prior: how far slope and offset may lie from what the engine itself says before evidence is in. */
const SLOPE_SPREAD = 0.4;
const OFFSET_SPREAD = 0.9;
/** Scores are held off 0 and 1, whose log odds are infinite. */
const SCORE_EDGE = 1e-3;

/**
 * Platt's line (1999) over the log odds of the score, one for each source, fitted by Newton's method to what was judged,
 * with a normal prior around slope 1 and offset 0: with nothing judged the scores stay as they are, and a few
 * judgements move them a little. The slope stays above zero, so the order within a source stays. O(judged).
 */
export function calibrationOf(judged: readonly Judged[]): Calibration {
  const lines = new Map<string, { slope: number; offset: number }>();
  for (const source of new Set(judged.map((entry) => entry.source)))
    lines.set(source, fitLine(judged.filter((entry) => entry.source === source)));
  return (score, source) => {
    const line = lines.get(source);
    return line ? sigmoid(line.slope * logOdds(score) + line.offset) : score;
  };
}

function fitLine(judged: readonly Judged[]): { slope: number; offset: number } {
  const points = judged.map(({ score, isKept }) => ({ x: logOdds(score), y: isKept ? 1 : 0 }));
  let slope = 1;
  let offset = 0;
  for (let round = 0; round < 25; round++) {
    let gradientSlope = (1 - slope) / SLOPE_SPREAD ** 2;
    let gradientOffset = -offset / OFFSET_SPREAD ** 2;
    let ss = 1 / SLOPE_SPREAD ** 2;
    let oo = 1 / OFFSET_SPREAD ** 2;
    let so = 0;
    for (const { x, y } of points) {
      const p = sigmoid(slope * x + offset);
      const w = p * (1 - p);
      gradientSlope += (y - p) * x;
      gradientOffset += y - p;
      ss += w * x * x;
      oo += w;
      so += w * x;
    }
    const determinant = ss * oo - so * so;
    const dSlope = (oo * gradientSlope - so * gradientOffset) / determinant;
    const dOffset = (ss * gradientOffset - so * gradientSlope) / determinant;
    slope = Math.min(4, Math.max(0.05, slope + Math.min(1, Math.max(-1, dSlope))));
    offset = Math.min(8, Math.max(-8, offset + Math.min(2, Math.max(-2, dOffset))));
    if (Math.abs(dSlope) + Math.abs(dOffset) < 1e-7) break;
  }
  return { slope, offset };
}

/**
 * Judges the proposals of a settled picture by what was agreed there: best first, a proposal is kept if it meets an agreed box
 * that none before it met (IoU 0.5 or more; of several the best, ties the first). O(proposals x agreed).
 */
export function judgeBySettled(
  proposals: readonly { box: Box; score: number; source: string }[],
  agreed: readonly Box[],
): Judged[] {
  const met = new Set<number>();
  return [...proposals]
    .sort((a, b) => b.score - a.score)
    .map(({ box, score, source }) => {
      let own = -1;
      let most = SAME_IOU;
      agreed.forEach((other, index) => {
        const iou = met.has(index) ? 0 : boxIou(box, other);
        if (iou > most || (own < 0 && iou >= most)) [own, most] = [index, iou];
      });
      if (own >= 0) met.add(own);
      return { source, score, isKept: own >= 0 };
    });
}

const sigmoid = (value: number) => 1 / (1 + Math.exp(-value));

function logOdds(score: number): number {
  const held = Math.min(1 - SCORE_EDGE, Math.max(SCORE_EDGE, score));
  return Math.log(held / (1 - held));
}
