import type { Box } from "./types";

/**
 * All pairs of boxes that share area, as (i, j) with i < j, by i and then j. Boxes that only touch are no pair.
 * Source: sweep along x over an active list. O(n log n + pairs side by side).
 */
export function candidatePairs(boxes: readonly Box[]): [number, number][] {
  const pairs: [number, number][] = [];
  sweepBoxes(boxes, (i, j) => pairs.push(i < j ? [i, j] : [j, i]));
  return pairs.sort((p, q) => p[0] - q[0] || p[1] - q[1]);
}

/** All pairs of a box of `a` and a box of `b` that share area, as (index in a, index in b), by the first and then the second. */
export function candidatePairsBetween(a: readonly Box[], b: readonly Box[]): [number, number][] {
  const pairs: [number, number][] = [];
  sweepBoxes([...a, ...b], (i, j) => {
    const low = Math.min(i, j);
    const high = Math.max(i, j);
    if (low < a.length && high >= a.length) pairs.push([low, high - a.length]);
  });
  return pairs.sort((p, q) => p[0] - q[0] || p[1] - q[1]);
}

function sweepBoxes(boxes: readonly Box[], meet: (i: number, j: number) => void): void {
  const count = boxes.length;
  const left = Float64Array.from(boxes, ([x]) => x);
  const order = Int32Array.from(boxes, (_, i) => i).sort((i, j) => left[i]! - left[j]! || i - j);
  const right = Float64Array.from(boxes, ([x, , width]) => x + width);
  const top = Float64Array.from(boxes, ([, y]) => y);
  const bottom = Float64Array.from(boxes, ([, y, , height]) => y + height);
  const active = new Int32Array(count);
  let size = 0;
  for (const box of order) {
    const x = left[box]!;
    if (!(right[box]! > x && bottom[box]! > top[box]!)) continue;
    let kept = 0;
    for (let k = 0; k < size; k++) {
      const other = active[k]!;
      if (right[other]! <= x) continue;
      active[kept++] = other;
      if (top[other]! < bottom[box]! && top[box]! < bottom[other]!) meet(other, box);
    }
    active[kept] = box;
    size = kept + 1;
  }
}
