import type { Point, Ring, Rings } from "./types";

/**
 * Signed area of a ring in px²; positive when it runs clockwise on screen (y points down), 0 for fewer than
 * three vertices. For a ring that crosses itself it is the sum of winding number times area; `ringsArea` in
 * region.ts gives the even-odd area. Vertices are taken relative to the first, so the rounding error scales
 * with the ring's size and not with its distance from the origin. Source: the shoelace formula (Meister, 1769).
 */
export function signedRingArea(ring: Ring): number {
  const first = ring[0];
  if (first === undefined) return 0;
  let twiceAreaPx2 = 0;
  let fromX = 0;
  let fromY = 0;
  for (const vertex of ring) {
    const toX = vertex[0] - first[0];
    const toY = vertex[1] - first[1];
    twiceAreaPx2 += fromX * toY - toX * fromY;
    fromX = toX;
    fromY = toY;
  }
  return twiceAreaPx2 / 2;
}

/** Length of the closed outline in px. */
export function ringPerimeter(ring: Ring): number {
  let lengthPx = 0;
  let from = ring[ring.length - 1];
  for (const to of ring) {
    if (from !== undefined) lengthPx += Math.hypot(to[0] - from[0], to[1] - from[1]);
    from = to;
  }
  return lengthPx;
}

/**
 * Centre of mass of a simple ring. A ring without area (collinear, repeated points) gets the length-weighted
 * centre of its outline, a ring whose vertices are all one point gets that point; undefined for no vertices.
 */
export function ringCentroid(ring: Ring): Point | undefined {
  const first = ring[0];
  if (first === undefined) return undefined;
  let twiceArea = 0;
  let momentX = 0;
  let momentY = 0;
  let fromX = 0;
  let fromY = 0;
  for (const vertex of ring) {
    const toX = vertex[0] - first[0];
    const toY = vertex[1] - first[1];
    const cross = fromX * toY - toX * fromY;
    twiceArea += cross;
    momentX += (fromX + toX) * cross;
    momentY += (fromY + toY) * cross;
    fromX = toX;
    fromY = toY;
  }
  const size = ringPerimeter(ring);
  if (Math.abs(twiceArea) > 1e-14 * size * size) {
    return [first[0] + momentX / (3 * twiceArea), first[1] + momentY / (3 * twiceArea)];
  }
  return outlineCentre(ring, size);
}

function outlineCentre(ring: Ring, lengthPx: number): Point | undefined {
  const last = ring[ring.length - 1];
  if (last === undefined || lengthPx === 0) return last;
  let from = last;
  let momentX = 0;
  let momentY = 0;
  for (const to of ring) {
    const length = Math.hypot(to[0] - from[0], to[1] - from[1]);
    momentX += length * (from[0] + to[0]);
    momentY += length * (from[1] + to[1]);
    from = to;
  }
  return [momentX / (2 * lengthPx), momentY / (2 * lengthPx)];
}

/**
 * Whether the point lies inside the rings by the even-odd rule. A point on the outline belongs to the region on
 * its right and below it, so that regions that share an edge never both hold a point of it.
 * Source: Shimrat, 1962 (crossing count). O(vertices).
 */
export function pointInRings([x, y]: Point, rings: Rings): boolean {
  let inside = false;
  for (const ring of rings) {
    let from = ring[ring.length - 1];
    for (const to of ring) {
      if (from !== undefined && from[1] <= y !== to[1] <= y) {
        // Taken from its upper end, as rasterising does, so that both regions beside it find the same crossing.
        const [top, bottom] = from[1] < to[1] ? [from, to] : [to, from];
        const crossX = top[0] + (y - top[1]) * ((bottom[0] - top[0]) / (bottom[1] - top[1]));
        if (crossX <= x) inside = !inside;
      }
      from = to;
    }
  }
  return inside;
}
