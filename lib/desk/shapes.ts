import { normaliseRings } from "@/lib/geometry/clip";
import { ringsArea } from "@/lib/geometry/region";
import { distanceToSegment } from "@/lib/geometry/snap";
import type { Box, Point, Ring, Rings, Shape } from "@/lib/geometry/types";
import { crosses } from "@/lib/geometry/validate";

/** The least side of a box and the least area of an outline that can be meant, px and px². */
export const SIDE_MIN_PX = 2;
export const AREA_MIN_PX2 = 4;

export type Size = { width: number; height: number };

const within = (value: number, most: number) => Math.min(most, Math.max(0, value));
const rounded = (value: number) => Math.round(value * 100) / 100;

/** A point pulled inside the image, to hundredths of a pixel. */
export function inside([x, y]: Point, { width, height }: Size): Point {
  return [rounded(within(x, width)), rounded(within(y, height))];
}

/** The box between two corners in any order, inside the image; undefined when it is too small to be meant. */
export function boxBetween(a: Point, b: Point, size: Size): Box | undefined {
  const [ax, ay] = inside(a, size);
  const [bx, by] = inside(b, size);
  const box: Box = [
    Math.min(ax, bx),
    Math.min(ay, by),
    rounded(Math.abs(ax - bx)),
    rounded(Math.abs(ay - by)),
  ];
  return box[2] < SIDE_MIN_PX || box[3] < SIDE_MIN_PX ? undefined : box;
}

function cross(o: Point, a: Point, b: Point): number {
  return (a[0] - o[0]) * (b[1] - o[1]) - (a[1] - o[1]) * (b[0] - o[0]);
}

/** Whether the open segments a-b and c-d cross in one inner point. */
function doCross(a: Point, b: Point, c: Point, d: Point): boolean {
  return cross(a, b, c) * cross(a, b, d) < 0 && cross(c, d, a) * cross(c, d, b) < 0;
}

/** Indices of the first two edges of a ring that cross each other, or undefined. O(n²); n is a person's clicks. */
export function findCrossing(ring: Ring): [number, number] | undefined {
  const n = ring.length;
  for (let i = 0; i < n; i++) {
    for (let j = i + 2; j < n; j++) {
      if (i === 0 && j === n - 1) continue; // neighbours over the seam
      const [a, b, c, d] = [ring[i], ring[(i + 1) % n], ring[j], ring[(j + 1) % n]];
      if (a && b && c && d && doCross(a, b, c, d)) return [i, j];
    }
  }
  return undefined;
}

/** Undoes crossings by reversing the stretch between them (2-opt; it ends, because each step shortens the ring). */
export function uncross(ring: Ring): Ring {
  let current = [...ring];
  for (let turn = 0; turn < ring.length * ring.length; turn++) {
    const crossing = findCrossing(current);
    if (!crossing) return current;
    const [i, j] = crossing;
    current = [...current.slice(0, i + 1), ...current.slice(i + 1, j + 1).reverse(), ...current.slice(j + 1)];
  }
  return current;
}

export type RingProblem = "too-few" | "too-small" | "crosses";

/** What is wrong with a drawn ring, or undefined. Parts that touch in a point are allowed. */
export function problemOf(ring: Ring): RingProblem | undefined {
  return problemOfRings([ring]);
}

/** What is wrong with an outline of one or more rings, or undefined. */
export function problemOfRings(rings: Rings): RingProblem | undefined {
  if (rings.length === 0 || rings.some((ring) => ring.length < 3)) return "too-few";
  if (rings.some((ring) => findCrossing(ring)) || crosses(rings)) return "crosses";
  if (ringsArea(rings) < AREA_MIN_PX2) return "too-small";
  return undefined;
}

/**
 * An outline without crossings for one that has them. A single ring is uncrossed first, which keeps it one
 * ring through the same points; what still crosses becomes the same even-odd region in rings that do not,
 * without slivers below the least area. Undefined when nothing is left.
 */
export function mend(rings: Rings): Rings | undefined {
  const [only] = rings;
  const once = rings.length === 1 && only ? [uncross(only)] : rings;
  if (!problemOfRings(once)) return once;
  const whole = normaliseRings(rings).filter((ring) => ringsArea([ring]) >= AREA_MIN_PX2);
  return problemOfRings(whole) ? undefined : whole;
}

/**
 * The points of a freehand stretch that matter: each that is left out lies within `tolerancePx` of the line
 * through those that stay. The ends stay. Source: Ramer (1972); Douglas and Peucker (1973).
 */
export function simplifyStretch(points: readonly Point[], tolerancePx: number): Point[] {
  const kept = new Uint8Array(points.length).fill(0);
  const spans: [number, number][] = [[0, points.length - 1]];
  for (let span = spans.pop(); span; span = spans.pop()) {
    const [from, to] = span;
    const [start, end] = [points[from], points[to]];
    if (!start || !end) continue;
    kept[from] = kept[to] = 1;
    let farthest = -1;
    let farthestPx = tolerancePx;
    for (let i = from + 1; i < to; i++) {
      const point = points[i];
      const away = point ? distanceToSegment(point, start, end).distance : 0;
      if (away > farthestPx) [farthest, farthestPx] = [i, away];
    }
    if (farthest > 0) spans.push([from, farthest], [farthest, to]);
  }
  return points.filter((_, index) => kept[index] === 1);
}

/** Takes out points that repeat the one before (a double click adds one) or lie closer than `leastPx`. */
export function withoutRepeats(points: readonly Point[], leastPx = 0.5): Point[] {
  const kept = points.filter((point, index) => {
    const before = points[index - 1];
    return !before || Math.hypot(point[0] - before[0], point[1] - before[1]) >= leastPx;
  });
  const [first] = kept;
  const last = kept.at(-1);
  if (first && last && kept.length > 1 && Math.hypot(first[0] - last[0], first[1] - last[1]) < leastPx)
    kept.pop();
  return kept;
}

/** Four extreme points in any order: the tight box, and the outline through them as a first guess. */
export function fromExtremes(points: readonly Point[], size: Size): { box: Box; ring: Ring } | undefined {
  if (points.length !== 4) return undefined;
  const xs = points.map(([x]) => x);
  const ys = points.map(([, y]) => y);
  const box = boxBetween([Math.min(...xs), Math.min(...ys)], [Math.max(...xs), Math.max(...ys)], size);
  if (!box) return undefined;
  const top = points.reduce((best, point) => (point[1] < best[1] ? point : best));
  const bottom = points.reduce((best, point) => (point[1] > best[1] ? point : best));
  const left = points.reduce((best, point) => (point[0] < best[0] ? point : best));
  const right = points.reduce((best, point) => (point[0] > best[0] ? point : best));
  // Each extreme point widened along its side by half of what its box leaves (Papadopoulos et al., 2017, octagon).
  const [x, y, width, height] = box;
  const alongX = (at: number, by: number) => Math.min(x + width, Math.max(x, at + by));
  const alongY = (at: number, by: number) => Math.min(y + height, Math.max(y, at + by));
  const octagon: Point[] = [
    [alongX(top[0], -width / 8), y],
    [alongX(top[0], width / 8), y],
    [x + width, alongY(right[1], -height / 8)],
    [x + width, alongY(right[1], height / 8)],
    [alongX(bottom[0], width / 8), y + height],
    [alongX(bottom[0], -width / 8), y + height],
    [x, alongY(left[1], height / 8)],
    [x, alongY(left[1], -height / 8)],
  ];
  return { box, ring: withoutRepeats(octagon) };
}

/** A shape moved whole, by as much as keeps it inside the image. Steps are hundredths of a pixel. */
export function moveShape(shape: Shape, dx: number, dy: number, size: Size): Shape {
  const [x, y, width, height] = bounds(shape);
  const byX = rounded(Math.min(size.width - x - width, Math.max(-x, dx)));
  const byY = rounded(Math.min(size.height - y - height, Math.max(-y, dy)));
  const movedX = (at: number) => within(at + byX, size.width);
  const movedY = (at: number) => within(at + byY, size.height);
  if (shape.kind === "box") {
    const [left, top] = [movedX(x), movedY(y)];
    return {
      kind: "box",
      box: [left, top, Math.min(width, size.width - left), Math.min(height, size.height - top)],
    };
  }
  const rings = shape.rings.map((ring) => ring.map(([px, py]): Point => [movedX(px), movedY(py)]));
  return { kind: "polygon", rings };
}

const boundsOf = new WeakMap<Shape, Box>();

/** The tight box of a shape, px. Kept for each shape that was asked for, since shapes are never changed. */
export function bounds(shape: Shape): Box {
  if (shape.kind === "box") return shape.box;
  const known = boundsOf.get(shape);
  if (known) return known;
  let [left, top, right, bottom] = [Infinity, Infinity, -Infinity, -Infinity];
  for (const ring of shape.rings) {
    for (const [x, y] of ring) {
      left = Math.min(left, x);
      right = Math.max(right, x);
      top = Math.min(top, y);
      bottom = Math.max(bottom, y);
    }
  }
  const box: Box = [left, top, right - left, bottom - top];
  boundsOf.set(shape, box);
  return box;
}

/** A shape as rings. */
export function ringsOf(shape: Shape): Rings {
  return shape.kind === "box" ? [corners(shape.box)] : shape.rings;
}

/** A box with one side moved to a coordinate: 0 top, 1 right, 2 bottom, 3 left. Undefined when too small. */
export function moveSide(box: Box, side: number, to: Point, size: Size): Box | undefined {
  const [x, y, width, height] = box;
  const [right, bottom] = [x + width, y + height];
  if (side === 0) return boxBetween([x, to[1]], [right, bottom], size);
  if (side === 1) return boxBetween([x, y], [to[0], bottom], size);
  if (side === 2) return boxBetween([x, y], [right, to[1]], size);
  return boxBetween([to[0], y], [right, bottom], size);
}

/** The corners of a box, clockwise from the top left: what can be dragged. */
export function corners([x, y, width, height]: Box): readonly [Point, Point, Point, Point] {
  return [
    [x, y],
    [x + width, y],
    [x + width, y + height],
    [x, y + height],
  ];
}

export function replaceVertex(rings: Rings, ringIndex: number, vertexIndex: number, to: Point): Rings {
  return rings.map((ring, r) =>
    r === ringIndex ? ring.map((vertex, v) => (v === vertexIndex ? to : vertex)) : ring,
  );
}

export function insertVertex(rings: Rings, ringIndex: number, afterIndex: number, at: Point): Rings {
  return rings.map((ring, r) =>
    r === ringIndex ? [...ring.slice(0, afterIndex + 1), at, ...ring.slice(afterIndex + 1)] : ring,
  );
}

/** Takes a vertex out; a ring that would keep fewer than three goes; undefined when no ring is left. */
export function removeVertex(rings: Rings, ringIndex: number, vertexIndex: number): Rings | undefined {
  const next = rings
    .map((ring, r) => (r === ringIndex ? ring.filter((_, v) => v !== vertexIndex) : ring))
    .filter((ring) => ring.length >= 3);
  return next.length > 0 ? next : undefined;
}
