/** Distance between items i and j; symmetric, 0 or more. */
export type Distance = (i: number, j: number) => number;

/** Labels in order of first appearance, from 0; negative labels stay -1. */
function relabelled(labels: ArrayLike<number>): Int32Array {
  const names = new Map<number, number>();
  return Int32Array.from(labels, (label) => {
    if (label < 0) return -1;
    const known = names.get(label) ?? names.size;
    names.set(label, known);
    return known;
  });
}

function rootOf(parent: Int32Array, i: number): number {
  while (parent[i] !== i) i = parent[i] = parent[parent[i]!]!;
  return i;
}

/**
 * Single linkage cut at `height` (Florek et al., 1951): items joined by a chain of steps no longer than that share a label.
 * O(n²).
 */
export function singleLinkage(n: number, distance: Distance, height: number): Int32Array {
  const parent = Int32Array.from({ length: n }, (_, i) => i);
  for (let i = 0; i < n; i++) {
    for (let j = i + 1; j < n; j++)
      if (distance(i, j) <= height) parent[rootOf(parent, j)] = rootOf(parent, i);
  }
  return relabelled(Int32Array.from({ length: n }, (_, i) => rootOf(parent, i)));
}

/**
 * Mean shift with a flat kernel, points weighted (Comaniciu and Meer, 2002): every point climbs to the weighted mean of its
 * window until it moves less than a thousandth of the bandwidth; modes within a bandwidth of a heavier one merge into
 * it; each point takes the nearest mode left. Centres come heaviest first. O(n² x rounds).
 */
export function meanShift(
  points: readonly (readonly number[])[],
  bandwidth: number,
  weights: ArrayLike<number> = new Float64Array(points.length).fill(1),
  roundsMax = 300,
): { centers: number[][]; labels: Int32Array } {
  const dimensions = points[0]?.length ?? 0;
  const modes = points.map((seed) => {
    let center = [...seed];
    let weight = 0;
    for (let round = 0; round < roundsMax; round++) {
      const sum = new Float64Array(dimensions);
      weight = 0;
      points.forEach((point, n) => {
        if (apart(point, center) > bandwidth) return;
        const own = weights[n]!;
        weight += own;
        for (let d = 0; d < dimensions; d++) sum[d]! += own * point[d]!;
      });
      const next = Array.from(sum, (value) => value / weight);
      const moved = apart(next, center);
      center = next;
      if (moved <= 1e-3 * bandwidth) break;
    }
    return { center, weight };
  });
  modes.sort((a, b) => b.weight - a.weight || compare(b.center, a.center));
  const centers: number[][] = [];
  for (const { center } of modes)
    if (centers.every((kept) => apart(kept, center) > bandwidth)) centers.push(center);
  const labels = Int32Array.from(points, (point) => {
    let best = 0;
    for (let k = 1; k < centers.length; k++)
      if (apart(point, centers[k]!) < apart(point, centers[best]!)) best = k;
    return best;
  });
  return { centers, labels };
}

/** Labels of `meanShift`; items of zero or negative weight count a little, so that every window has a mean. */
export function meanShiftModes(
  points: readonly (readonly number[])[],
  weights: readonly number[],
  bandwidth: number,
): Int32Array {
  return relabelled(
    meanShift(
      points,
      bandwidth,
      weights.map((weight) => Math.max(1e-6, weight)),
    ).labels,
  );
}

function apart(a: readonly number[], b: readonly number[]): number {
  let sum = 0;
  for (let d = 0; d < a.length; d++) sum += (a[d]! - b[d]!) ** 2;
  return Math.sqrt(sum);
}

function compare(a: readonly number[], b: readonly number[]): number {
  for (let d = 0; d < a.length; d++) if (a[d] !== b[d]) return a[d]! - b[d]!;
  return 0;
}

type Cluster = { children: Cluster[]; birth: number; stability: number; items: number[] };

/**
 * HDBSCAN* with excess of mass (Campello, Moulavi and Sander, 2013): the tree of mutual reachability, condensed at
 * `clusterSizeMin`, of which the most stable flat clusters are taken; the root is not one of them. -1 is noise. O(n²).
 */
export function hdbscan(
  n: number,
  distance: Distance,
  { clusterSizeMin, samplesMin = clusterSizeMin }: { clusterSizeMin: number; samplesMin?: number },
): Int32Array {
  const labels = new Int32Array(n).fill(-1);
  if (n < Math.max(2, clusterSizeMin)) return labels;
  const tree = mergeTree(n, spanningTree(n, distance, coreDistances(n, distance, samplesMin)));
  const root: Cluster = { children: [], birth: 0, stability: 0, items: [] };
  condense(root, n, tree, clusterSizeMin);
  root.children
    .flatMap((child) => mostStable(child).chosen)
    .forEach((cluster, k) => {
      for (const item of itemsOf(cluster)) labels[item] = k;
    });
  return relabelled(labels);
}

/** Distance to the `samplesMin`-th item, the item itself being the first. */
function coreDistances(n: number, distance: Distance, samplesMin: number): Float64Array {
  return Float64Array.from({ length: n }, (_, i) => {
    const row = Float64Array.from({ length: n }, (_, j) => (i === j ? 0 : distance(i, j))).sort();
    return row[Math.min(n, samplesMin) - 1]!;
  });
}

type Edge = { a: number; b: number; length: number };

/** Prim's algorithm over mutual reachability; edges from the shortest. */
function spanningTree(n: number, distance: Distance, core: Float64Array): Edge[] {
  const best = new Float64Array(n).fill(Infinity);
  const from = new Int32Array(n);
  const isDone = new Uint8Array(n);
  const edges: Edge[] = [];
  isDone[0] = 1;
  for (let current = 0, step = 1; step < n; step++) {
    let next = -1;
    for (let j = 0; j < n; j++) {
      if (isDone[j]) continue;
      const length = Math.max(distance(current, j), core[current]!, core[j]!);
      if (length < best[j]!) [best[j], from[j]] = [length, current];
      if (next < 0 || best[j]! < best[next]!) next = j;
    }
    edges.push({ a: from[next]!, b: next, length: best[next]! });
    isDone[next] = 1;
    current = next;
  }
  return edges.sort((p, q) => p.length - q.length);
}

type Merge = { left: number; right: number; length: number; size: number };

function mergeTree(n: number, edges: readonly Edge[]): Merge[] {
  const parent = Int32Array.from({ length: n }, (_, i) => i);
  const node = Int32Array.from({ length: n }, (_, i) => i);
  const tree: Merge[] = [];
  const sizeOf = (at: number) => (at < n ? 1 : tree[at - n]!.size);
  for (const { a, b, length } of edges) {
    const p = rootOf(parent, a);
    const q = rootOf(parent, b);
    tree.push({ left: node[p]!, right: node[q]!, length, size: sizeOf(node[p]!) + sizeOf(node[q]!) });
    parent[q] = p;
    node[p] = n + tree.length - 1;
  }
  return tree;
}

/** Density at which a merge splits; equal items have a ceiling, so that sums stay finite. */
const densityOf = (length: number) => (length > 1e-9 ? 1 / length : 1e9);

function condense(root: Cluster, n: number, tree: readonly Merge[], sizeMin: number): void {
  const sizeOf = (at: number) => (at < n ? 1 : tree[at - n]!.size);
  const stack: { cluster: Cluster; at: number }[] = [{ cluster: root, at: n + tree.length - 1 }];
  for (let top = stack.pop(); top !== undefined; top = stack.pop()) {
    const { cluster, at } = top;
    if (at < n) {
      cluster.items.push(at);
      continue;
    }
    const { left, right, length } = tree[at - n]!;
    const density = densityOf(length);
    const isSplit = sizeOf(left) >= sizeMin && sizeOf(right) >= sizeMin;
    for (const side of [left, right]) {
      if (isSplit) {
        cluster.stability += sizeOf(side) * (density - cluster.birth);
        const child: Cluster = { children: [], birth: density, stability: 0, items: [] };
        cluster.children.push(child);
        stack.push({ cluster: child, at: side });
      } else if (sizeOf(side) >= sizeMin) stack.push({ cluster, at: side });
      else {
        cluster.stability += sizeOf(side) * (density - cluster.birth);
        cluster.items.push(...leavesUnder(side, n, tree));
      }
    }
  }
}

function leavesUnder(at: number, n: number, tree: readonly Merge[]): number[] {
  const found: number[] = [];
  const stack = [at];
  for (let top = stack.pop(); top !== undefined; top = stack.pop()) {
    if (top < n) found.push(top);
    else stack.push(tree[top - n]!.left, tree[top - n]!.right);
  }
  return found;
}

function mostStable(cluster: Cluster): { chosen: Cluster[]; stability: number } {
  const below = cluster.children.map(mostStable);
  const sum = below.reduce((total, child) => total + child.stability, 0);
  return below.length > 0 && sum > cluster.stability
    ? { chosen: below.flatMap(({ chosen }) => chosen), stability: sum }
    : { chosen: [cluster], stability: cluster.stability };
}

function itemsOf(cluster: Cluster): number[] {
  return [...cluster.items, ...cluster.children.flatMap(itemsOf)];
}
