import type { DeskInstance } from "@/lib/contracts/desk";
import type { Point, Rings } from "@/lib/geometry/types";
import { bounds, corners } from "./shapes";

export type Hit =
  | { part: "vertex"; id: string; ring: number; vertex: number }
  | { part: "edge"; id: string; ring: number; vertex: number; at: Point }
  | { part: "body"; id: string }
  | { part: "ground" };

/** How near counts, in screen px; a finger is wider than a pointer. */
export const SLOP_PX = { mouse: 7, pen: 9, touch: 18 } as const;

/**
 * What lies under a point of the image: a vertex or edge of the selected shape within `slop` image px, else
 * the smallest shape that holds the point (so that a small one on a large one can be reached), else open
 * ground. A box's corners are its vertices 0 to 3. O(instances), vertices of the selected shape only.
 */
export function hitTest(instances: readonly DeskInstance[], selectedId: string | null, at: Point, slop: number): Hit {
  const selected = instances.find((instance) => instance.id === selectedId);
  if (selected) {
    const rings: Rings = selected.shape.kind === "box" ? [corners(selected.shape.box)] : selected.shape.rings;
    const vertex = nearestVertex(rings, at, slop);
    if (vertex) return { part: "vertex", id: selected.id, ...vertex };
    const edge = nearestEdge(rings, at, slop * 0.8);
    if (edge) return { part: "edge", id: selected.id, ...edge };
  }
  let best: { id: string; area: number } | undefined;
  for (const instance of instances) {
    const [x, y, width, height] = bounds(instance.shape);
    if (at[0] < x || at[1] < y || at[0] > x + width || at[1] > y + height) continue;
    if (instance.shape.kind === "polygon" && !holds(instance.shape.rings, at)) continue;
    // A box is taken by its rim or, when it is selected, anywhere: what is inside it must stay reachable.
    if (!best || width * height < best.area) best = { id: instance.id, area: width * height };
  }
  return best ? { part: "body", id: best.id } : { part: "ground" };
}

function nearestVertex(rings: Rings, [x, y]: Point, slop: number) {
  let best: { ring: number; vertex: number } | undefined;
  let bestPx = slop;
  rings.forEach((ring, ringIndex) =>
    ring.forEach(([vx, vy], vertex) => {
      const away = Math.hypot(vx - x, vy - y);
      if (away <= bestPx) [best, bestPx] = [{ ring: ringIndex, vertex }, away];
    }),
  );
  return best;
}

function nearestEdge(rings: Rings, at: Point, slop: number) {
  let best: { ring: number; vertex: number; at: Point } | undefined;
  let bestPx = slop;
  rings.forEach((ring, ringIndex) =>
    ring.forEach((from, vertex) => {
      const to = ring[(vertex + 1) % ring.length] ?? from;
      const foot = footOn(from, to, at);
      const away = Math.hypot(foot[0] - at[0], foot[1] - at[1]);
      if (away <= bestPx) [best, bestPx] = [{ ring: ringIndex, vertex, at: foot }, away];
    }),
  );
  return best;
}

function footOn([ax, ay]: Point, [bx, by]: Point, [x, y]: Point): Point {
  const lengthSquared = (bx - ax) ** 2 + (by - ay) ** 2;
  const t = lengthSquared === 0 ? 0 : Math.min(1, Math.max(0, ((x - ax) * (bx - ax) + (y - ay) * (by - ay)) / lengthSquared));
  return [ax + t * (bx - ax), ay + t * (by - ay)];
}

/** Whether rings hold a point, even-odd. */
export function holds(rings: Rings, [x, y]: Point): boolean {
  let isInside = false;
  for (const ring of rings) {
    for (let i = 0, j = ring.length - 1; i < ring.length; j = i++) {
      const [xi, yi] = ring[i] ?? [0, 0];
      const [xj, yj] = ring[j] ?? [0, 0];
      if (yi > y !== yj > y && x < ((xj - xi) * (y - yi)) / (yj - yi) + xi) isInside = !isInside;
    }
  }
  return isInside;
}
