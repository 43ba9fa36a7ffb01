import { boxOfRing } from "./box";
import { pointInRings, signedRingArea } from "./ring";
import type { Point, Ring, Rings } from "./types";

/** One connected piece of a region: its outer ring and the holes in it. */
export type Part = { readonly outer: Ring; readonly holes: readonly Ring[] };

/**
 * Sorts rings that do not cross (see `normaliseRings`) into pieces with their holes, in order of the outer
 * rings. A ring inside an even number of others is an outer ring, inside an odd number a hole of the smallest
 * ring around it. O(rings² * vertices) in the worst case; boxes apart cost nothing.
 */
export function partsOfRings(rings: Rings): Part[] {
  const areas = rings.map((ring) => Math.abs(signedRingArea(ring)));
  const around = rings.map((ring, i) =>
    rings.flatMap((other, j) => (i !== j && areas[j]! >= areas[i]! && encloses(other, ring) ? [j] : [])),
  );
  const isHole = around.map((list) => list.length % 2 === 1);
  return rings.flatMap((outer, i) => {
    if (isHole[i]) return [];
    const holes = rings.filter(
      (_, k) =>
        isHole[k] &&
        smallest(
          around[k]!.filter((j) => !isHole[j]),
          areas,
        ) === i,
    );
    return [{ outer, holes }];
  });
}

function smallest(candidates: readonly number[], areas: readonly number[]): number | undefined {
  return candidates.toSorted((p, q) => areas[p]! - areas[q]! || p - q)[0];
}

/** Rings that do not cross may still touch, so the majority of the edges' midpoints decides. */
function encloses(outer: Ring, inner: Ring): boolean {
  const a = boxOfRing(outer);
  const b = boxOfRing(inner);
  if (b[0] < a[0] || b[1] < a[1] || b[0] + b[2] > a[0] + a[2] || b[1] + b[3] > a[1] + a[3]) return false;
  const inside = midpoints(inner).filter((point) => pointInRings(point, [outer])).length;
  return 2 * inside > inner.length;
}

function midpoints(ring: Ring): Point[] {
  return ring.map(([x, y], i) => {
    const [nextX, nextY] = ring[(i + 1) % ring.length]!;
    return [(x + nextX) / 2, (y + nextY) / 2];
  });
}

/** The ring in the wanted sense on screen; reversed where it runs the other way. */
export function withSense(ring: Ring, isClockwise: boolean): Ring {
  return signedRingArea(ring) > 0 === isClockwise ? ring : ring.toReversed();
}
