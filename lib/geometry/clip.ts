import { Clipper, ClipType, type PathsD } from "clipper2-ts";
import { boxOfRings } from "./box";
import { clipRingToBox } from "./clipRing";
import { withoutRepeats, withoutSpikes } from "./clean";
import { boundedBoolean } from "./clipper";
import { prepareRings, regionIntersectionArea, type Region } from "./region";
import { ringPerimeter } from "./ring";
import type { Point, Ring, Rings } from "./types";

export type RingsRule = "union" | "intersection" | "difference" | "xor";

const CLIP_TYPE = {
  union: ClipType.Union,
  intersection: ClipType.Intersection,
  difference: ClipType.Difference,
  xor: ClipType.Xor,
} as const;

/** New corners are rounded to 1/10,000 px; the finer and coarser grids are for input on which that one goes wrong. */
const ATTEMPTS = [
  { decimals: 4, turned: false, fresh: true },
  { decimals: 4, turned: true, fresh: true },
  ...[6, 5, 3].flatMap((decimals) => [false, true].map((turned) => ({ decimals, turned, fresh: false }))),
];
/** A corner moved by the rounding changes the area by its edges' length times this, px. */
const ROUNDING_PX = 1e-4;

/**
 * Combines two regions (even-odd) into rings that do not cross. An empty result has no rings. Corners that the operation
 * makes are rounded to 1/10,000 px; corners that it keeps stay as they were to the bit. The clipper's area is
 * checked against the sweep of region.ts, and where they differ by more than rounding (seen on overlapping
 * self-crossing rings), or the clipper finds no end, the operation is done again on other grids from normalised
 * input, and with x and y exchanged, which makes another sweep of it. It always ends.
 * Engine: Clipper2 (Johnson; after Vatti, 1992). Areas and IoU never come from here.
 */
export function combineRings(a: Rings, b: Rings, rule: RingsRule): Rings {
  const expectedPx2 = combinedArea(prepareRings(a), prepareRings(b), rule);
  const edgesPx = [...a, ...b].reduce((sum, ring) => sum + ringPerimeter(ring), 0);
  let best: { paths: PathsD; errorPx2: number } | undefined;
  for (const { decimals, turned, fresh } of ATTEMPTS) {
    const [subject, clip] = [a, b].map((rings) => {
      const paths = turned ? exchanged(toPaths(rings)) : toPaths(rings);
      return fresh ? paths : boundedBoolean(ClipType.Union, paths, [], decimals);
    });
    const found = subject && clip && boundedBoolean(CLIP_TYPE[rule], subject, clip, decimals);
    if (!found) continue;
    const paths = turned ? exchanged(found) : found;
    const errorPx2 = Math.abs(Clipper.areaPathsD(paths) - expectedPx2);
    if (best === undefined || errorPx2 < best.errorPx2) best = { paths, errorPx2 };
    if (best.errorPx2 <= ROUNDING_PX * edgesPx) break;
  }
  if (best === undefined)
    throw new Error("These outlines cannot be combined: the clipper finds no end on any grid");
  return fromPaths(best.paths, [...a, ...b]);
}

/** The same paths with x and y exchanged, run backwards, so that the sign of areas stays. */
function exchanged(paths: PathsD): PathsD {
  return paths.map((path) => path.map(({ x, y }) => ({ x: y, y: x })).reverse());
}

function combinedArea(a: Region, b: Region, rule: RingsRule): number {
  const common = regionIntersectionArea(a, b);
  switch (rule) {
    case "union":
      return a.areaPx2 + b.areaPx2 - common;
    case "intersection":
      return common;
    case "difference":
      return a.areaPx2 - common;
    case "xor":
      return a.areaPx2 + b.areaPx2 - 2 * common;
  }
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

/**
 * The part of a region inside an image of this size, as rings that do not cross.
 */
export function clipRingsToImage(rings: Rings, width: number, height: number): Rings {
  const inside = rings.map((ring) => clipRingToBox(ring, [0, 0, width, height]));
  // Rounding of the clipper may leave a corner a hair outside.
  return normaliseRings(inside).map((ring) =>
    ring.map(([x, y]): Point => [Math.min(width, Math.max(0, x)), Math.min(height, Math.max(0, y))]),
  );
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
  // Spikes bound nothing, but the clipper has been seen to fill them.
  return rings
    .map((ring) => withoutSpikes(withoutRepeats(ring)))
    .filter((ring) => ring.length >= 3)
    .map((ring) => ring.map(([x, y]) => ({ x, y })));
}

/** Corners that were there before get their exact coordinates back. */
function fromPaths(paths: PathsD, sources: Rings): Rings {
  const key = (x: number, y: number) => `${Math.round(x / ROUNDING_PX)},${Math.round(y / ROUNDING_PX)}`;
  const exact = new Map<string, Point>();
  for (const ring of sources) for (const point of ring) exact.set(key(point[0], point[1]), point);
  return paths
    .filter((path) => path.length >= 3)
    .map((path) => path.map(({ x, y }): Point => exact.get(key(x, y)) ?? [x, y]));
}
