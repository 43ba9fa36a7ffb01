import type { Point, Ring } from "./types";

/**
 * The convex hull, clockwise on screen from its leftmost (then topmost) vertex, without collinear vertices. Fewer
 * than three points come back for input that is a point or a line. Source: Andrew, 1979 (monotone chain). O(n log n).
 */
export function convexHull(points: readonly Point[]): Ring {
  const sorted = [...points].sort((a, b) => a[0] - b[0] || a[1] - b[1]);
  const distinct = sorted.filter(
    (p, i) => i === 0 || p[0] !== sorted[i - 1]![0] || p[1] !== sorted[i - 1]![1],
  );
  if (distinct.length < 3) return distinct;
  const upper = chain(distinct);
  const lower = chain(distinct.toReversed());
  return [...upper.slice(0, -1), ...lower.slice(0, -1)];
}

/** The part of the hull that turns right all the way along the points. */
function chain(points: readonly Point[]): Point[] {
  const kept: Point[] = [];
  for (const point of points) {
    while (kept.length >= 2 && turn(kept[kept.length - 2]!, kept[kept.length - 1]!, point) <= 0) kept.pop();
    kept.push(point);
  }
  return kept;
}

/** Positive where a, b, c turn clockwise on screen. */
function turn(a: Point, b: Point, c: Point): number {
  return (b[0] - a[0]) * (c[1] - a[1]) - (c[0] - a[0]) * (b[1] - a[1]);
}
