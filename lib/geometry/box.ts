import type { Box, Point, Ring, Rings, Shape } from "./types";

/** Area in px²; 0 for a box whose width or height is not positive. */
export function boxArea([, , width, height]: Box): number {
  return width > 0 && height > 0 ? width * height : 0;
}

/** The common part of two boxes; undefined where they share no area (touching boxes share none). */
export function boxIntersection(a: Box, b: Box): Box | undefined {
  const left = Math.max(a[0], b[0]);
  const top = Math.max(a[1], b[1]);
  const width = Math.min(a[0] + a[2], b[0] + b[2]) - left;
  const height = Math.min(a[1] + a[3], b[1] + b[3]) - top;
  return width > 0 && height > 0 ? [left, top, width, height] : undefined;
}

/** Area of the common part in px²; 0 where the boxes only touch. */
export function boxIntersectionArea(a: Box, b: Box): number {
  const width = Math.min(a[0] + a[2], b[0] + b[2]) - Math.max(a[0], b[0]);
  const height = Math.min(a[1] + a[3], b[1] + b[3]) - Math.max(a[1], b[1]);
  return width > 0 && height > 0 ? width * height : 0;
}

/**
 * Intersection over union, 0..1. Symmetric to the bit; 1 for two equal boxes of positive area; 0 where either
 * is empty. Source: Jaccard, 1901.
 */
export function boxIou(a: Box, b: Box): number {
  const common = boxIntersectionArea(a, b);
  if (common === 0) return 0;
  if (a[0] === b[0] && a[1] === b[1] && a[2] === b[2] && a[3] === b[3]) return 1;
  return Math.min(1, common / (boxArea(a) + boxArea(b) - common));
}

/** The smallest box around both. */
export function boxUnion(a: Box, b: Box): Box {
  const left = Math.min(a[0], b[0]);
  const top = Math.min(a[1], b[1]);
  const right = Math.max(a[0] + a[2], b[0] + b[2]);
  const bottom = Math.max(a[1] + a[3], b[1] + b[3]);
  return [left, top, right - left, bottom - top];
}

/** The smallest box around all points; [0, 0, 0, 0] for none. */
export function boxFromPoints(points: Iterable<Point>): Box {
  let left = Infinity;
  let top = Infinity;
  let right = -Infinity;
  let bottom = -Infinity;
  for (const [x, y] of points) {
    if (x < left) left = x;
    if (x > right) right = x;
    if (y < top) top = y;
    if (y > bottom) bottom = y;
  }
  return left <= right && top <= bottom ? [left, top, right - left, bottom - top] : [0, 0, 0, 0];
}

/** The smallest box around a ring; [0, 0, 0, 0] for none. */
export function boxOfRing(ring: Ring): Box {
  return boxFromPoints(ring);
}

/** The smallest box around all rings; [0, 0, 0, 0] for none. */
export function boxOfRings(rings: Rings): Box {
  let left = Infinity;
  let top = Infinity;
  let right = -Infinity;
  let bottom = -Infinity;
  for (const ring of rings) {
    for (let i = 0; i < ring.length; i++) {
      const point = ring[i]!;
      const x = point[0];
      const y = point[1];
      if (x < left) left = x;
      if (x > right) right = x;
      if (y < top) top = y;
      if (y > bottom) bottom = y;
    }
  }
  return left <= right && top <= bottom ? [left, top, right - left, bottom - top] : [0, 0, 0, 0];
}

/** The smallest box around a shape; a box is its own. */
export function boxOfShape(shape: Shape): Box {
  return shape.kind === "box" ? shape.box : boxOfRings(shape.rings);
}

/** The four corners from the top left one, clockwise on screen. */
export function ringOfBox([x, y, width, height]: Box): Ring {
  return [
    [x, y],
    [x + width, y],
    [x + width, y + height],
    [x, y + height],
  ];
}

/** The part of a box inside an image of this size; undefined where none of its area is. */
export function clipBoxToImage(box: Box, width: number, height: number): Box | undefined {
  return boxIntersection(box, [0, 0, width, height]);
}
