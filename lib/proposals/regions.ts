import type { Lab } from "@/lib/vision/lab";
import type { Segments } from "@/lib/vision/segments";

const HIST_BINS = 12;
const HIST = HIST_BINS * 3;

/** A node of the grouping: a segment or the union of two nodes. Boxes are inclusive px ranges. */
export type Region = {
  left: number;
  top: number;
  right: number;
  bottom: number;
  areaPx2: number;
  /** Segments that make it up. */
  members: readonly number[];
  /** Normalised colour histogram over L, a and b. */
  histogram: Float32Array;
  /** Edge strength along its outer border, Lab units a pixel step. */
  borderStrength: number;
  /** Mean edge strength between the parts inside it. */
  innerStrength: number;
  /** Share of its border that is the picture's edge, 0..1. */
  atEdge: number;
  /** Intersection of its histogram with that of its neighbours, 0 (alone) .. 1 (the same). */
  likeNeighbours: number;
};

type Link = { length: number; strength: number };
type Node = {
  left: number;
  top: number;
  right: number;
  bottom: number;
  area: number;
  members: number[];
  histogram: Float32Array;
  edge: number;
  inner: Link;
  links: Map<number, Link>;
  live: boolean;
};

/**
 * Hierarchical grouping of segments (Uijlings et al., IJCV 2013): the two neighbours that are most alike in
 * colour, smallness and fit join, again and again. Every node on the way is a region, with what its border
 * says. O(segments² log segments) at worst; some hundred segments take a few milliseconds.
 */
export function groupRegions(segments: Segments, lab: Lab): Region[] {
  const nodes = leaves(segments, lab);
  const regions = nodes.map((node) => describe(node, nodes));
  const pixels = segments.width * segments.height;
  const heap: { score: number; a: number; b: number }[] = [];
  const push = (a: number, b: number) => {
    const [one, other] = [nodes[a], nodes[b]];
    if (!one || !other) return;
    heap.push({ score: likeness(one, other, pixels), a, b });
    up(heap);
  };
  nodes.forEach((node, a) => {
    for (const b of node.links.keys()) if (a < b) push(a, b);
  });
  while (heap.length > 0) {
    const { a, b } = pop(heap);
    const one = nodes[a];
    const other = nodes[b];
    if (!one?.live || !other?.live) continue;
    const joined = join(one, other, a, b);
    const name = nodes.length;
    nodes.push(joined);
    one.live = other.live = false;
    for (const [neighbour, link] of joined.links) {
      const node = nodes[neighbour];
      if (!node) continue;
      node.links.delete(a);
      node.links.delete(b);
      node.links.set(name, link);
      push(neighbour, name);
    }
    regions.push(describe(joined, nodes));
  }
  return regions;
}

function leaves({ width, height, label, count }: Segments, { l, a, b }: Lab): Node[] {
  const nodes = Array.from({ length: count }, (_, name): Node => ({
    left: width,
    top: height,
    right: -1,
    bottom: -1,
    area: 0,
    members: [name],
    histogram: new Float32Array(HIST),
    edge: 0,
    inner: { length: 0, strength: 0 },
    links: new Map(),
    live: true,
  }));
  const bin = (value: number, low: number, high: number) =>
    Math.min(HIST_BINS - 1, Math.max(0, (((value - low) / (high - low)) * HIST_BINS) | 0));
  const link = (p: number, q: number, strength: number) => {
    const from = nodes[p]!;
    const known = from.links.get(q);
    if (known) {
      known.length += 1;
      known.strength += strength;
    } else {
      const made = { length: 1, strength };
      from.links.set(q, made);
      nodes[q]!.links.set(p, made); // shared: both sides see the same border
    }
  };
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const i = y * width + x;
      const node = nodes[label[i]!]!;
      if (x < node.left) node.left = x;
      if (x > node.right) node.right = x;
      if (y < node.top) node.top = y;
      if (y > node.bottom) node.bottom = y;
      node.area += 1;
      if (x === 0 || y === 0 || x === width - 1 || y === height - 1) node.edge += 1;
      node.histogram[bin(l[i]!, 0, 100)]! += 1;
      node.histogram[HIST_BINS + bin(a[i]!, -40, 50)]! += 1;
      node.histogram[2 * HIST_BINS + bin(b[i]!, -40, 55)]! += 1;
      for (const j of [x + 1 < width ? i + 1 : -1, y + 1 < height ? i + width : -1]) {
        if (j < 0 || label[j] === label[i]) continue;
        const dl = l[i]! - l[j]!;
        const da = a[i]! - a[j]!;
        const db = b[i]! - b[j]!;
        link(label[i]!, label[j]!, Math.sqrt(dl * dl + da * da + db * db));
      }
    }
  }
  for (const node of nodes) for (let i = 0; i < HIST; i++) node.histogram[i]! /= 3 * node.area;
  return nodes;
}

function intersection(p: Float32Array, q: Float32Array): number {
  let sum = 0;
  for (let i = 0; i < HIST; i++) sum += Math.min(p[i]!, q[i]!);
  return sum;
}

function likeness(one: Node, other: Node, pixels: number): number {
  const left = Math.min(one.left, other.left);
  const top = Math.min(one.top, other.top);
  const right = Math.max(one.right, other.right);
  const bottom = Math.max(one.bottom, other.bottom);
  const box = (right - left + 1) * (bottom - top + 1);
  const area = one.area + other.area;
  return intersection(one.histogram, other.histogram) + (1 - area / pixels) + (1 - (box - area) / pixels);
}

function join(one: Node, other: Node, a: number, b: number): Node {
  const area = one.area + other.area;
  const histogram = new Float32Array(HIST);
  for (let i = 0; i < HIST; i++)
    histogram[i] = (one.histogram[i]! * one.area + other.histogram[i]! * other.area) / area;
  const between = one.links.get(b) ?? { length: 0, strength: 0 };
  const links = new Map<number, Link>();
  for (const source of [one, other]) {
    for (const [neighbour, link] of source.links) {
      if (neighbour === a || neighbour === b) continue;
      const known = links.get(neighbour);
      links.set(
        neighbour,
        known ? { length: known.length + link.length, strength: known.strength + link.strength } : link,
      );
    }
  }
  return {
    left: Math.min(one.left, other.left),
    top: Math.min(one.top, other.top),
    right: Math.max(one.right, other.right),
    bottom: Math.max(one.bottom, other.bottom),
    area,
    members: [...one.members, ...other.members],
    histogram,
    edge: one.edge + other.edge,
    inner: {
      length: one.inner.length + other.inner.length + between.length,
      strength: one.inner.strength + other.inner.strength + between.strength,
    },
    links,
    live: true,
  };
}

/** What a node's border says, told when it is made: its links then name the nodes that live beside it. */
function describe(node: Node, nodes: readonly Node[]): Region {
  let length = 0;
  let strength = 0;
  let alike = 0;
  for (const [neighbour, link] of node.links) {
    const other = nodes[neighbour];
    if (!other) continue;
    length += link.length;
    strength += link.strength;
    alike += link.length * intersection(node.histogram, other.histogram);
  }
  return {
    left: node.left,
    top: node.top,
    right: node.right,
    bottom: node.bottom,
    areaPx2: node.area,
    members: node.members,
    histogram: node.histogram,
    borderStrength: length > 0 ? strength / length : 0,
    innerStrength: node.inner.length > 0 ? node.inner.strength / node.inner.length : 0,
    atEdge: node.edge / (node.edge + length + 1),
    likeNeighbours: length > 0 ? alike / length : 1,
  };
}

type Pair = { score: number; a: number; b: number };

/** Highest score first; ties to the earlier pair, so that the grouping is the same on every machine. */
function before(p: Pair, q: Pair): boolean {
  return p.score > q.score || (p.score === q.score && (p.a < q.a || (p.a === q.a && p.b < q.b)));
}

function up(heap: Pair[]): void {
  let i = heap.length - 1;
  while (i > 0) {
    const parent = (i - 1) >> 1;
    if (!before(heap[i]!, heap[parent]!)) return;
    [heap[i], heap[parent]] = [heap[parent]!, heap[i]!];
    i = parent;
  }
}

function pop(heap: Pair[]): Pair {
  const top = heap[0]!;
  const last = heap.pop()!;
  if (heap.length === 0) return top;
  heap[0] = last;
  for (let i = 0; ;) {
    const left = 2 * i + 1;
    const right = left + 1;
    let best = i;
    if (left < heap.length && before(heap[left]!, heap[best]!)) best = left;
    if (right < heap.length && before(heap[right]!, heap[best]!)) best = right;
    if (best === i) return top;
    [heap[i], heap[best]] = [heap[best]!, heap[i]!];
    i = best;
  }
}
