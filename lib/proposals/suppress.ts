import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";

/**
 * Non-maximum suppression: goes through boxes by score (ties by index) and keeps each that overlaps no kept one by more
 * than `iouMax`. Returns indices, best first, at most `limit`. O(n x kept).
 */
export function suppress(
  boxes: readonly Box[],
  scores: ArrayLike<number>,
  iouMax: number,
  limit = Infinity,
): number[] {
  const kept: number[] = [];
  for (const index of byScore(scores)) {
    if (kept.length >= limit) break;
    if (isFree(boxes, kept, index, iouMax)) kept.push(index);
  }
  return kept;
}

/**
 * Suppression that is strict among the first and lenient after: the first `count` overlap by at most `strictMax`, so that
 * a person who sees a few sees different objects; what follows, also of those passed over, by `lenientMax`.
 */
export function suppressInTwo(
  boxes: readonly Box[],
  scores: ArrayLike<number>,
  {
    strictMax,
    lenientMax,
    count,
    limit,
  }: { strictMax: number; lenientMax: number; count: number; limit: number },
): number[] {
  const kept = suppress(boxes, scores, strictMax, Math.min(count, limit));
  if (limit <= count) return kept;
  const taken = new Set(kept);
  for (const index of byScore(scores)) {
    if (kept.length >= limit) break;
    if (!taken.has(index) && isFree(boxes, kept, index, lenientMax)) kept.push(index);
  }
  return kept;
}

/** Indices from the highest score down, ties by index. */
export function byScore(scores: ArrayLike<number>): number[] {
  return Array.from({ length: scores.length }, (_, index) => index).sort(
    (a, b) => scores[b]! - scores[a]! || a - b,
  );
}

function isFree(boxes: readonly Box[], kept: readonly number[], index: number, iouMax: number): boolean {
  const box = boxes[index]!;
  for (let n = 0; n < kept.length; n++) if (boxIou(box, boxes[kept[n]!]!) > iouMax) return false;
  return true;
}
