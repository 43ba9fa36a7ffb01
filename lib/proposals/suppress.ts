import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";

/**
 * Non-maximum suppression: goes through boxes by score (ties by index) and keeps each that overlaps no kept
 * one by more than `iouMax`. Returns indices, best first, at most `limit`. O(n x kept).
 */
export function suppress(
  boxes: readonly Box[],
  scores: readonly number[],
  iouMax: number,
  limit = Infinity,
): number[] {
  const order = boxes.map((_, index) => index).sort((a, b) => (scores[b] ?? 0) - (scores[a] ?? 0) || a - b);
  const kept: number[] = [];
  for (const index of order) {
    if (kept.length >= limit) break;
    const box = boxes[index];
    if (box && kept.every((other) => boxIou(box, boxes[other] ?? box) <= iouMax)) kept.push(index);
  }
  return kept;
}
