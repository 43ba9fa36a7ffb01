import type { Box, Point, Ring } from "./types";

/**
 * The part of a ring inside a box as one ring, which may run along the box's sides and touch itself there; under the
 * even-odd rule what it encloses is right. Fewer than three vertices where nothing is inside.
 * Source: Sutherland and Hodgman, 1974. O(vertices).
 */
export function clipRingToBox(ring: Ring, [x, y, width, height]: Box): Ring {
  const sides: readonly Side[] = [
    { axis: 0, sign: 1, at: x },
    { axis: 0, sign: -1, at: x + width },
    { axis: 1, sign: 1, at: y },
    { axis: 1, sign: -1, at: y + height },
  ];
  return sides.reduce(clipToSide, ring);
}

type Side = { readonly axis: 0 | 1; readonly sign: 1 | -1; readonly at: number };

function clipToSide(ring: Ring, { axis, sign, at }: Side): Ring {
  const kept: Point[] = [];
  let from = ring[ring.length - 1];
  for (const to of ring) {
    if (from === undefined) break;
    const fromIn = sign * (from[axis] - at) >= 0;
    const toIn = sign * (to[axis] - at) >= 0;
    if (fromIn !== toIn) {
      const t = (at - from[axis]) / (to[axis] - from[axis]);
      const across = from[1 - axis]! + t * (to[1 - axis]! - from[1 - axis]!);
      kept.push(axis === 0 ? [at, across] : [across, at]);
    }
    if (toIn) kept.push(to);
    from = to;
  }
  return kept;
}
