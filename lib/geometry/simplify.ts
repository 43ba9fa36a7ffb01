import { prepareRings, regionIou } from "./region";
import type { Point, Ring, Rings } from "./types";

/**
 * Rings with as few vertices as the bound allows: the IoU with the original, measured and not estimated, stays at
 * least 1 - iouLossMax. Vertices leave in order of the area of the triangle with their neighbours (Visvalingam and
 * Whyatt, 1993), and the longest admissible run of removals is found by bisection. Each ring keeps three vertices
 * or disappears. A bound of 0 removes only vertices that add no area. O(n log n) plus log n IoUs.
 */
export function simplifyRings(rings: Rings, iouLossMax: number): Rings {
  const original = prepareRings(rings);
  if (!(original.areaPx2 > 0) || !(iouLossMax >= 0)) return rings;
  const removals = removalOrder(rings);
  const passes = (count: number) =>
    regionIou(original, prepareRings(without(rings, removals, count))) >= 1 - iouLossMax - 1e-12;
  let low = 0;
  let high = removals.length;
  while (low < high) {
    const middle = (low + high + 1) >> 1;
    if (passes(middle)) low = middle;
    else high = middle - 1;
  }
  return without(rings, removals, low);
}

type Removal = { readonly ring: number; readonly vertex: number };

function without(rings: Rings, removals: readonly Removal[], count: number): Rings {
  const gone = rings.map((ring) => new Uint8Array(ring.length));
  for (let i = 0; i < count; i++) {
    const { ring, vertex } = removals[i]!;
    if (vertex < 0) gone[ring]!.fill(1);
    else gone[ring]![vertex] = 1;
  }
  return rings.map((ring, i) => ring.filter((_, v) => gone[i]![v] === 0)).filter((ring) => ring.length >= 3);
}

/** All removals over all rings, cheapest first; ties by ring and vertex. A vertex never leaves before a cheaper state. */
function removalOrder(rings: Rings): Removal[] {
  const costed: (Removal & { cost: number })[] = [];
  rings.forEach((ring, index) => {
    let floor = 0;
    for (const { vertex, area } of visvalingam(ring)) {
      // Areas may fall as vertices leave; the order must not, or a later removal would come before its cause.
      floor = Math.max(floor, area);
      costed.push({ ring: index, vertex, cost: floor });
    }
  });
  return costed
    .map((removal, sequence) => ({ ...removal, sequence }))
    .sort((p, q) => p.cost - q.cost || p.sequence - q.sequence);
}

/** Vertices in order of removal with the area each removal changes; the last entry (vertex -1) drops the triangle left over. */
function visvalingam(ring: Ring): { vertex: number; area: number }[] {
  const n = ring.length;
  const before = Int32Array.from(ring, (_, i) => (i + n - 1) % n);
  const after = Int32Array.from(ring, (_, i) => (i + 1) % n);
  const areaOf = (i: number) => triangleArea(ring[before[i]!]!, ring[i]!, ring[after[i]!]!);
  const areas = Float64Array.from(ring, (_, i) => areaOf(i));
  const heap = new VertexHeap(areas);
  const order: { vertex: number; area: number }[] = [];
  while (heap.size > 3) {
    const vertex = heap.pop();
    order.push({ vertex, area: areas[vertex]! });
    const left = before[vertex]!;
    const right = after[vertex]!;
    after[left] = right;
    before[right] = left;
    for (const neighbour of [left, right]) {
      areas[neighbour] = areaOf(neighbour);
      heap.update(neighbour);
    }
  }
  if (n >= 3) order.push({ vertex: -1, area: areaOf(heap.pop()) });
  return order;
}

function triangleArea([ax, ay]: Point, [bx, by]: Point, [cx, cy]: Point): number {
  return Math.abs((bx - ax) * (cy - ay) - (cx - ax) * (by - ay)) / 2;
}

/** A binary heap of vertices by area, ties by number, that can move a vertex whose area has changed. */
class VertexHeap {
  private readonly heap: number[];
  private readonly place: Int32Array;

  constructor(private readonly areas: Float64Array) {
    this.heap = Array.from(areas, (_, i) => i);
    this.place = Int32Array.from(this.heap);
    for (let i = (this.heap.length >> 1) - 1; i >= 0; i--) this.sink(i);
  }

  get size(): number {
    return this.heap.length;
  }

  pop(): number {
    const top = this.heap[0]!;
    const last = this.heap.pop()!;
    if (this.heap.length > 0) {
      this.put(0, last);
      this.sink(0);
    }
    return top;
  }

  update(vertex: number): void {
    this.rise(this.place[vertex]!);
    this.sink(this.place[vertex]!);
  }

  private isLess(a: number, b: number): boolean {
    return this.areas[a]! < this.areas[b]! || (this.areas[a] === this.areas[b] && a < b);
  }

  private put(at: number, vertex: number): void {
    this.heap[at] = vertex;
    this.place[vertex] = at;
  }

  private rise(at: number): void {
    const vertex = this.heap[at]!;
    while (at > 0) {
      const parent = (at - 1) >> 1;
      if (!this.isLess(vertex, this.heap[parent]!)) break;
      this.put(at, this.heap[parent]!);
      at = parent;
    }
    this.put(at, vertex);
  }

  private sink(at: number): void {
    const vertex = this.heap[at]!;
    for (;;) {
      let child = 2 * at + 1;
      if (child >= this.heap.length) break;
      if (child + 1 < this.heap.length && this.isLess(this.heap[child + 1]!, this.heap[child]!)) child++;
      if (!this.isLess(this.heap[child]!, vertex)) break;
      this.put(at, this.heap[child]!);
      at = child;
    }
    this.put(at, vertex);
  }
}
