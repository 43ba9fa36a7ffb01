import type { DeskInstance } from "@/lib/contracts/desk";
import type { Point, Rings } from "@/lib/geometry/types";
import { bounds, ringsOf } from "./shapes";

export type Hit =
  | { part: "vertex"; id: string; ring: number; vertex: number }
  | { part: "edge"; id: string; ring: number; vertex: number; at: Point }
  | { part: "body"; id: string }
  | { part: "ground" };

/** How near counts, in screen px; a finger is wider than a pointer. */
export const SLOP_PX = { mouse: 7, pen: 9, touch: 18 } as const;

/** Instances from the smallest box to the largest, with the boxes flat: left, top, right, bottom. */
type HitIndex = { readonly order: readonly DeskInstance[]; readonly edges: Float64Array };

const indexOf = new WeakMap<readonly DeskInstance[], HitIndex>();

/**
 * Made once for each list, O(n log n). At the desk's most, 2,000 shapes, a look through the flat boxes takes
 * some ten microseconds, less than a tree would take to keep up with edits.
 */
function indexFor(instances: readonly DeskInstance[]): HitIndex {
  const known = indexOf.get(instances);
  if (known) return known;
  const area = (instance: DeskInstance) => bounds(instance.shape)[2] * bounds(instance.shape)[3];
  const order = instances.toSorted((a, b) => area(a) - area(b));
  const edges = new Float64Array(order.length * 4);
  order.forEach((instance, i) => {
    const [x, y, width, height] = bounds(instance.shape);
    edges.set([x, y, x + width, y + height], i * 4);
  });
  const index = { order, edges };
  indexOf.set(instances, index);
  return index;
}

export type HitOptions = {
  selectedId: string | null;
  hiddenClassIds?: ReadonlySet<string>;
  /** Reach, in image px. */
  slop: number;
};

/**
 * What lies under a point of the image: a vertex or edge of the selected shape within `slop` image px, else
 * the smallest shape that holds the point (so that a small one on a large one can be reached), else open
 * ground. A box's corners are its vertices 0 to 3 and its sides the edges 0 to 3, both clockwise from the top left.
 * Ties go to what was drawn first.
 */
export function hitTest(instances: readonly DeskInstance[], at: Point, options: HitOptions): Hit {
  const { selectedId, hiddenClassIds, slop } = options;
  const selected = instances.find((instance) => instance.id === selectedId);
  if (selected && !hiddenClassIds?.has(selected.classId)) {
    const rings = ringsOf(selected.shape);
    const vertex = nearestVertex(rings, at, slop);
    if (vertex) return { part: "vertex", id: selected.id, ...vertex };
    const edge = nearestEdge(rings, at, slop * 0.8);
    if (edge) return { part: "edge", id: selected.id, ...edge };
  }
  const { order, edges } = indexFor(instances);
  for (let i = 0; i < order.length; i++) {
    const isNear =
      at[0] >= edges[i * 4]! &&
      at[1] >= edges[i * 4 + 1]! &&
      at[0] <= edges[i * 4 + 2]! &&
      at[1] <= edges[i * 4 + 3]!;
    const instance = order[i];
    if (!isNear || !instance || hiddenClassIds?.has(instance.classId)) continue;
    if (instance.shape.kind === "box" || holds(instance.shape.rings, at))
      return { part: "body", id: instance.id };
  }
  return { part: "ground" };
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
  const t =
    lengthSquared === 0
      ? 0
      : Math.min(1, Math.max(0, ((x - ax) * (bx - ax) + (y - ay) * (by - ay)) / lengthSquared));
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
