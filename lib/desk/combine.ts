import { combineRings, splitRings } from "@/lib/geometry/clip";
import { ringsArea } from "@/lib/geometry/region";
import { snapRing } from "@/lib/geometry/snap";
import type { Point, Rings, Shape } from "@/lib/geometry/types";
import { AREA_MIN_PX2, inside, mend, ringsOf, type Size } from "./shapes";

/** A shape and another one as one outline; parts that do not touch stay parts of it. */
export function joined(a: Shape, b: Shape, size: Size): Shape | undefined {
  return tidy(combineRings(ringsOf(a), ringsOf(b), "union"), size);
}

/** What of a shape lies outside another: a hole where the other is inside, a bite where it crosses the rim. */
export function cutOut(from: Shape, hole: Shape, size: Size): Shape | undefined {
  return tidy(combineRings(ringsOf(from), ringsOf(hole), "difference"), size);
}

/** The two parts of a shape on either side of a line; undefined where it misses or leaves too little of one. */
export function splitBy(shape: Shape, from: Point, to: Point, size: Size): [Shape, Shape] | undefined {
  const parts = splitRings(ringsOf(shape), from, to);
  const left = parts && tidy(parts.left, size);
  const right = parts && tidy(parts.right, size);
  return left && right ? [left, right] : undefined;
}

/**
 * A shape whose border within `reachPx` of its neighbours runs along theirs, so that both share it. Undefined
 * when no neighbour is in reach or nothing would be left.
 */
export function sharingBorder(
  shape: Shape,
  neighbours: readonly Shape[],
  reachPx: number,
  size: Size,
): Shape | undefined {
  const rings = neighbours.flatMap((neighbour) => [...ringsOf(neighbour)]);
  const before = ringsOf(shape);
  const after = before.map((ring) => snapRing(ring, rings, reachPx)).filter((ring) => ring.length >= 3);
  if (JSON.stringify(after) === JSON.stringify(before)) return undefined;
  return tidy(after, size);
}

/** An outline as the document keeps it: inside the image, on hundredths of a pixel, without slivers. */
function tidy(rings: Rings, size: Size): Shape | undefined {
  const kept = rings.filter((ring) => ringsArea([ring]) >= AREA_MIN_PX2);
  const rounded = kept.map((ring) => withoutDoubles(ring.map((point) => inside(point, size))));
  const whole = mend(rounded.filter((ring) => ring.length >= 3));
  return whole && { kind: "polygon", rings: whole };
}

function withoutDoubles(ring: readonly Point[]): Point[] {
  return ring.filter((point, i) => {
    const before = ring[(i + ring.length - 1) % ring.length];
    return !before || before[0] !== point[0] || before[1] !== point[1];
  });
}
