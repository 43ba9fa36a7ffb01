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
  const next = edgeLinks(2 * columns * rows);
  const starts: number[] = [];
  const link = (from: number, to: number) => {
    next[from] = to;
    starts.push(from);
  };
  for (let row = 0; row + 1 < rows; row++) {
    const first = row * columns;
    // The two nodes on the left of the cell, as bits 1 and 8; the right-hand ones are the next cell's left.
    let before = (field[first]! >= level ? 1 : 0) | (field[first + columns]! >= level ? 8 : 0);
    for (let column = 0; column + 1 < columns; column++) {
      const node = first + column;
      const after = (field[node + 1]! >= level ? 1 : 0) | (field[node + columns + 1]! >= level ? 8 : 0);
      const code = before | ((after & 1) << 1) | ((after & 8) >> 1);
      before = after;
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

/** Kept between calls: all links are taken out again as the outlines are followed. */
let links = new Int32Array(0);

function edgeLinks(count: number): Int32Array {
  if (links.length < count) links = new Int32Array(2 * count).fill(-1);
  return links;
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
  const previous = new Int32Array(n);
  const following = new Int32Array(n);
  const queue = new VertexQueue(n);
  for (let i = 0; i < n; i++) {
    previous[i] = i === 0 ? n - 1 : i - 1;
    following[i] = i === n - 1 ? 0 : i + 1;
    queue.area[i] = triangle(xs, ys, previous[i]!, i, following[i]!);
  }
  queue.build();
  let left = budget;
  while (queue.size > 3) {
    const i = queue.heap[0]!;
    if (queue.area[i]! > left) break;
    left -= queue.area[i]!;
    queue.shift();
    const p = previous[i]!;
    const q = following[i]!;
    following[p] = q;
    previous[q] = p;
    queue.move(p, triangle(xs, ys, previous[p]!, p, q));
    queue.move(q, triangle(xs, ys, p, q, following[q]!));
  }
  return ring.filter((_, i) => queue.place[i]! >= 0);
}

function triangle(xs: Float64Array, ys: Float64Array, p: number, i: number, q: number): number {
  const x = xs[p]!;
  const y = ys[p]!;
  return Math.abs((xs[i]! - x) * (ys[q]! - y) - (xs[q]! - x) * (ys[i]! - y)) / 2;
}

/** Vertices by area of their triangle, smallest first, ties by index: a binary heap that knows each one's place. */
class VertexQueue {
  readonly area: Float64Array;
  readonly heap: Int32Array;
  /** Place in the heap; -1 once taken out. */
  readonly place: Int32Array;
  size: number;

  constructor(count: number) {
    this.area = new Float64Array(count);
    this.heap = new Int32Array(count);
    this.place = new Int32Array(count);
    this.size = count;
  }

  build(): void {
    for (let i = 0; i < this.size; i++) this.heap[i] = this.place[i] = i;
    for (let at = (this.size >> 1) - 1; at >= 0; at--) this.down(at);
  }

  shift(): void {
    this.place[this.heap[0]!] = -1;
    this.size--;
    this.heap[0] = this.heap[this.size]!;
    this.place[this.heap[0]!] = 0;
    this.down(0);
  }

  move(vertex: number, area: number): void {
    const grows = area > this.area[vertex]!;
    this.area[vertex] = area;
    if (grows) this.down(this.place[vertex]!);
    else this.up(this.place[vertex]!);
  }

  private up(at: number): void {
    const { heap, place, area } = this;
    const item = heap[at]!;
    const own = area[item]!;
    while (at > 0) {
      const parent = (at - 1) >> 1;
      const other = heap[parent]!;
      const value = area[other]!;
      if (value < own || (value === own && other < item)) break;
      heap[at] = other;
      place[other] = at;
      at = parent;
    }
    heap[at] = item;
    place[item] = at;
  }

  private down(at: number): void {
    const { heap, place, area, size } = this;
    const item = heap[at]!;
    const own = area[item]!;
    for (;;) {
      let child = 2 * at + 1;
      if (child >= size) break;
      let other = heap[child]!;
      let value = area[other]!;
      if (child + 1 < size) {
        const right = heap[child + 1]!;
        const second = area[right]!;
        if (second < value || (second === value && right < other)) {
          child++;
          other = right;
          value = second;
        }
      }
      if (own < value || (own === value && item < other)) break;
      heap[at] = other;
      place[other] = at;
      at = child;
    }
    heap[at] = item;
    place[item] = at;
  }
}
