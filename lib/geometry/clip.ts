import { Clipper, ClipType, FillRule, type PathsD } from "clipper2-ts";
import { boxOfRings } from "./box";
import type { Point, Ring, Rings } from "./types";

/**
 * Outlines of unions, differences and cuts. Areas and IoU never come from here (see region.ts): this is for where
 * a new outline has to be drawn. Corners that the operation makes are rounded to 1/10,000 px; corners that
 * it keeps stay as they were to the bit. Engine: Clipper2 (Johnson; after Vatti, 1992).
 */
const DECIMALS = 4;
const UNITS_PER_PX = 10 ** DECIMALS;

export type RingsRule = "union" | "intersection" | "difference" | "xor";

const CLIP_TYPE = {
  union: ClipType.Union,
  intersection: ClipType.Intersection,
  difference: ClipType.Difference,
  xor: ClipType.Xor,
} as const;

/** Combines two regions (even-odd) into rings that do not cross. An empty result has no rings. */
export function combineRings(a: Rings, b: Rings, rule: RingsRule): Rings {
  const paths = Clipper.booleanOpD(CLIP_TYPE[rule], toPaths(a), toPaths(b), FillRule.EvenOdd, DECIMALS);
  return fromPaths(paths, [...a, ...b]);
}

/** The same region (even-odd) as rings that cross neither themselves nor each other. */
export function normaliseRings(rings: Rings): Rings {
  return combineRings(rings, [], "union");
}

/** The region that any of the given ones covers. */
export function mergeRegions(regions: readonly Rings[]): Rings {
  return regions.reduce<Rings>((merged, rings) => combineRings(merged, rings, "union"), []);
}

/** The region less a hole drawn into it. */
export function cutHole(rings: Rings, hole: Ring): Rings {
  return combineRings(rings, [hole], "difference");
}

/** The part of a region inside an image of this size. */
export function clipRingsToImage(rings: Rings, width: number, height: number): Rings {
  const frame: Ring = [
    [0, 0],
    [width, 0],
    [width, height],
    [0, height],
  ];
  return combineRings(rings, [frame], "intersection");
}

/**
 * Splits a region by the straight line through two points: what lies on the left of the way from `from` to `to` (as seen
 * on screen) and what lies on its right. Undefined where the line misses the region or the points are the same.
 */
export function splitRings(rings: Rings, from: Point, to: Point): { left: Rings; right: Rings } | undefined {
  const length = Math.hypot(to[0] - from[0], to[1] - from[1]);
  if (!(length > 0)) return undefined;
  const [x, y, width, height] = boxOfRings(rings);
  const reach = 2 * (width + height) + Math.hypot(from[0] - x, from[1] - y) + 1;
  const along: Point = [((to[0] - from[0]) / length) * reach, ((to[1] - from[1]) / length) * reach];
  const start: Point = [from[0] - along[0], from[1] - along[1]];
  const end: Point = [from[0] + along[0], from[1] + along[1]];
  // With y downwards, the right-hand side of the direction (dx, dy) is (-dy, dx).
  const side = (sign: number): Ring => [
    start,
    end,
    [end[0] - sign * along[1], end[1] + sign * along[0]],
    [start[0] - sign * along[1], start[1] + sign * along[0]],
  ];
  const right = combineRings(rings, [side(1)], "intersection");
  const left = combineRings(rings, [side(-1)], "intersection");
  return left.length > 0 && right.length > 0 ? { left, right } : undefined;
}

function toPaths(rings: Rings): PathsD {
  return rings.filter((ring) => ring.length >= 3).map((ring) => ring.map(([x, y]) => ({ x, y })));
}

/** Corners that were there before get their exact coordinates back. */
function fromPaths(paths: PathsD, sources: Rings): Rings {
  const key = (x: number, y: number) => `${Math.round(x * UNITS_PER_PX)},${Math.round(y * UNITS_PER_PX)}`;
  const exact = new Map<string, Point>();
  for (const ring of sources) for (const point of ring) exact.set(key(point[0], point[1]), point);
  return paths
    .filter((path) => path.length >= 3)
    .map((path) => path.map(({ x, y }): Point => exact.get(key(x, y)) ?? [x, y]));
}
