import type { Point, Ring, Rings } from "@/lib/geometry/types";
import type { Grid } from "./field";
import { ROW_PHASE } from "./spans";

/**
 * Outlines of `field >= level` by marching squares with linear interpolation (Lorensen and Cline, 1987, in the
 * plane), in image px: outer rings and holes, to be read under the even-odd rule. At a saddle the mean of
 * the four nodes decides. The field must be below the level on the grid's margin. O(nodes).
 */
export function contours(grid: Grid, field: Float32Array, level: number): Rings {
  const { columns, rows } = grid;
  // Edge ids: 2 * node for the edge to the right neighbour, 2 * node + 1 for the edge downwards.
  const next = new Int32Array(2 * columns * rows).fill(-1);
  const starts: number[] = [];
  const link = (from: number, to: number) => {
    next[from] = to;
    starts.push(from);
  };
  for (let row = 0; row + 1 < rows; row++) {
    for (let column = 0; column + 1 < columns; column++) {
      const node = row * columns + column;
      const a = field[node]! >= level;
      const b = field[node + 1]! >= level;
      const c = field[node + columns + 1]! >= level;
      const d = field[node + columns]! >= level;
      const code = Number(a) | (Number(b) << 1) | (Number(c) << 2) | (Number(d) << 3);
      if (code === 0 || code === 15) continue;
      const top = 2 * node;
      const bottom = 2 * (node + columns);
      const left = 2 * node + 1;
      const right = 2 * (node + 1) + 1;
      // The inside lies to the right of every step, so each edge is left exactly once.
      switch (code) {
        case 1:
          link(top, left);
          break;
        case 2:
          link(right, top);
          break;
        case 3:
          link(right, left);
          break;
        case 4:
          link(bottom, right);
          break;
        case 6:
          link(bottom, top);
          break;
        case 7:
          link(bottom, left);
          break;
        case 8:
          link(left, bottom);
          break;
        case 9:
          link(top, bottom);
          break;
        case 11:
          link(right, bottom);
          break;
        case 12:
          link(left, right);
          break;
        case 13:
          link(top, right);
          break;
        case 14:
          link(left, top);
          break;
        default: {
          const mean =
            (field[node]! + field[node + 1]! + field[node + columns]! + field[node + columns + 1]!) / 4;
          const joined = mean >= level;
          if (code === 5) {
            link(top, joined ? right : left);
            link(bottom, joined ? left : right);
          } else {
            link(right, joined ? bottom : top);
            link(left, joined ? top : bottom);
          }
        }
      }
    }
  }
  const rings: Ring[] = [];
  for (const start of starts) {
    if (next[start] === -1) continue;
    const ring: Point[] = [];
    let edge = start;
    while (next[edge] !== -1) {
      ring.push(crossing(grid, field, level, edge));
      const to: number = next[edge]!;
      next[edge] = -1;
      edge = to;
    }
    if (ring.length >= 3) rings.push(ring);
  }
  return rings;
}

function crossing(grid: Grid, field: Float32Array, level: number, edge: number): Point {
  const { cellPx, columns } = grid;
  const node = edge >> 1;
  const down = (edge & 1) === 1;
  const a = field[node]!;
  const b = field[node + (down ? columns : 1)]!;
  const t = (level - a) / (b - a);
  const column = (node % columns) + (down ? 0 : t);
  const row = Math.floor(node / columns) + (down ? t : 0);
  return [(grid.firstColumn + column + 0.5) * cellPx, (grid.firstRow + row) * cellPx + ROW_PHASE];
}

/** Signed area in px² by the shoelace formula, relative to the first vertex. */
export function ringArea(ring: Ring): number {
  const [x0, y0] = ring[0]!;
  let twice = 0;
  for (let i = 1; i + 1 < ring.length; i++) {
    const p = ring[i]!;
    const q = ring[i + 1]!;
    twice += (p[0] - x0) * (q[1] - y0) - (q[0] - x0) * (p[1] - y0);
  }
  return twice / 2;
}

/**
 * The same region with fewer vertices: the vertex whose triangle is smallest goes first (Visvalingam and Whyatt, 1993),
 * as long as all triangles and dropped specks together stay within `areaLossMaxPx2`. That sum bounds the
 * area that changes sides, so IoU with the input is at least 1 - areaLossMaxPx2 / area. Rings keep at
 * least three vertices. O(v log v).
 */
export function simplify(rings: Rings, areaLossMaxPx2: number): Rings {
  let budget = areaLossMaxPx2;
  const bySize = [...rings].sort((a, b) => Math.abs(ringArea(a)) - Math.abs(ringArea(b)));
  const specks = new Set<Ring>();
  for (const ring of bySize.slice(0, -1)) {
    const area = Math.abs(ringArea(ring));
    // Specks may use a quarter of the budget; the rest is for vertices.
    if (area > areaLossMaxPx2 / 4 || area > budget) break;
    budget -= area;
    specks.add(ring);
  }
  const kept = rings.filter((ring) => !specks.has(ring));
  const total = kept.reduce((sum, ring) => sum + Math.abs(ringArea(ring)), 0);
  return kept.map((ring) => thin(ring, total > 0 ? (budget * Math.abs(ringArea(ring))) / total : 0));
}

function thin(ring: Ring, budget: number): Ring {
  const n = ring.length;
  if (n <= 3) return ring;
  const xs = Float64Array.from(ring, (point) => point[0]);
  const ys = Float64Array.from(ring, (point) => point[1]);
  const previous = Int32Array.from(ring, (_, i) => (i + n - 1) % n);
  const following = Int32Array.from(ring, (_, i) => (i + 1) % n);
  const area = new Float64Array(n);
  const heap = new Int32Array(n);
  const place = new Int32Array(n);
  const triangle = (i: number) => {
    const p = previous[i]!;
    const q = following[i]!;
    return Math.abs((xs[i]! - xs[p]!) * (ys[q]! - ys[p]!) - (xs[q]! - xs[p]!) * (ys[i]! - ys[p]!)) / 2;
  };
  let size = n;
  const less = (a: number, b: number) => area[a]! < area[b]! || (area[a] === area[b] && a < b);
  const up = (at: number) => {
    const item = heap[at]!;
    while (at > 0) {
      const parent = (at - 1) >> 1;
      if (!less(item, heap[parent]!)) break;
      heap[at] = heap[parent]!;
      place[heap[at]!] = at;
      at = parent;
    }
    heap[at] = item;
    place[item] = at;
  };
  const down = (at: number) => {
    const item = heap[at]!;
    for (;;) {
      let child = 2 * at + 1;
      if (child >= size) break;
      if (child + 1 < size && less(heap[child + 1]!, heap[child]!)) child++;
      if (!less(heap[child]!, item)) break;
      heap[at] = heap[child]!;
      place[heap[at]!] = at;
      at = child;
    }
    heap[at] = item;
    place[item] = at;
  };
  for (let i = 0; i < n; i++) {
    area[i] = triangle(i);
    heap[i] = i;
    place[i] = i;
  }
  for (let at = (n >> 1) - 1; at >= 0; at--) down(at);
  const gone = new Uint8Array(n);
  let left = budget;
  while (size > 3) {
    const i = heap[0]!;
    if (area[i]! > left) break;
    left -= area[i]!;
    gone[i] = 1;
    size--;
    heap[0] = heap[size]!;
    place[heap[0]!] = 0;
    down(0);
    const p = previous[i]!;
    const q = following[i]!;
    following[p] = q;
    previous[q] = p;
    for (const j of [p, q]) {
      area[j] = triangle(j);
      up(place[j]!);
      down(place[j]!);
    }
  }
  return ring.filter((_, i) => gone[i] === 0);
}
