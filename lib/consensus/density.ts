import { find, relabel } from "./linkage";

/** Distance between items i and j; symmetric, 0 or more. */
export type Distance = (i: number, j: number) => number;

/**
 * DBSCAN (Ester et al., 1996): clusters grown from items with at least `samplesMin` items (themselves
 * included) within `epsilon`. -1 is noise. Items are visited in order, so a border item joins the first
 * cluster that reaches it. O(n²).
 */
export function dbscan(n: number, distance: Distance, epsilon: number, samplesMin: number): Int32Array {
  const near = (i: number) => Array.from({ length: n }, (_, j) => j).filter((j) => distance(i, j) <= epsilon);
  const neighbours = Array.from({ length: n }, (_, i) => near(i));
  const labels = new Int32Array(n).fill(-1);
  let cluster = 0;
  for (let seed = 0; seed < n; seed++) {
    if (labels[seed] !== -1 || neighbours[seed]!.length < samplesMin) continue;
    const stack = [seed];
    labels[seed] = cluster;
    for (let item = stack.pop(); item !== undefined; item = stack.pop()) {
      if (neighbours[item]!.length < samplesMin) continue;
      for (const j of neighbours[item]!) {
        if (labels[j] === -1) {
          labels[j] = cluster;
          stack.push(j);
        }
      }
    }
    cluster++;
  }
  return labels;
}

/**
 * Mean shift with a flat kernel from every point (Comaniciu and Meer, 2002). Converged centres within one
 * bandwidth of a centre with more points in its window are dropped; each point takes the nearest centre
 * left. Centres come most populous first, ties by coordinates. `scale`, if given, divides the distance
 * from a point. O(n² x iterations).
 */
export function meanShift(
  points: readonly (readonly number[])[],
  bandwidth: number,
  iterationsMax = 300,
): { centers: number[][]; labels: Int32Array } {
  const dimensions = points[0]?.length ?? 0;
  const within = (center: readonly number[]) =>
    points.filter((point) => distanceOf(point, center) <= bandwidth);
  const converged = points.map((seed) => {
    let center: readonly number[] = seed;
    let count = 0;
    for (let iteration = 0; iteration < iterationsMax; iteration++) {
      const inside = within(center);
      count = inside.length;
      const mean = Array.from(
        { length: dimensions },
        (_, d) => inside.reduce((sum, p) => sum + p[d]!, 0) / count,
      );
      const moved = distanceOf(mean, center);
      center = mean;
      // The same stopping rule as the reference: a thousandth of the bandwidth.
      if (moved <= 1e-3 * bandwidth) break;
    }
    return { center: [...center], count };
  });
  converged.sort((a, b) => b.count - a.count || compareArrays(b.center, a.center));
  const centers: number[][] = [];
  for (const { center } of converged) {
    if (centers.every((kept) => distanceOf(kept, center) > bandwidth)) centers.push(center);
  }
  const labels = Int32Array.from(points, (point) => {
    let best = 0;
    centers.forEach((center, k) => {
      if (distanceOf(point, center) < distanceOf(point, centers[best]!)) best = k;
    });
    return best;
  });
  return { centers, labels };
}

function distanceOf(a: readonly number[], b: readonly number[]): number {
  let sum = 0;
  for (let d = 0; d < a.length; d++) sum += (a[d]! - b[d]!) ** 2;
  return Math.sqrt(sum);
}

function compareArrays(a: readonly number[], b: readonly number[]): number {
  for (let d = 0; d < a.length; d++) if (a[d] !== b[d]) return a[d]! - b[d]!;
  return 0;
}

type Node = { children: Node[]; size: number; birth: number; items: number[]; stability: number };

/**
 * HDBSCAN* with excess of mass (Campello, Moulavi and Sander, 2013; Campello et al., 2015): the hierarchy
 * of mutual reachability, condensed at `clusterSizeMin`, from which the most stable flat clusters are taken.
 * The root is only taken when `allowSingle` says so. -1 is noise. O(n²).
 */
export function hdbscan(
  n: number,
  distance: Distance,
  {
    clusterSizeMin,
    samplesMin = clusterSizeMin,
    allowSingle = false,
  }: { clusterSizeMin: number; samplesMin?: number; allowSingle?: boolean },
): Int32Array {
  const labels = new Int32Array(n).fill(-1);
  if (n < clusterSizeMin || n < 2) return labels;
  const core = coreDistances(n, distance, samplesMin);
  const edges = spanningTree(n, (i, j) => Math.max(distance(i, j), core[i]!, core[j]!));
  const root = condense(n, edges, clusterSizeMin);
  const chosen = allowSingle ? select(root) : root.children.flatMap(select);
  if (!allowSingle && root.children.length === 0) return labels;
  chosen.forEach((node, k) => collect(node).forEach((item) => (labels[item] = k)));
  return relabel(labels);
}

function coreDistances(n: number, distance: Distance, samplesMin: number): Float64Array {
  const rank = Math.min(samplesMin, n) - 1; // the item itself, at distance 0, is its first neighbour
  return Float64Array.from({ length: n }, (_, i) => {
    const row = Float64Array.from({ length: n }, (_, j) => (i === j ? 0 : distance(i, j))).sort();
    return row[Math.max(0, rank)]!;
  });
}

function spanningTree(n: number, distance: Distance): { a: number; b: number; length: number }[] {
  const best = new Float64Array(n).fill(Infinity);
  const from = new Int32Array(n);
  const done = new Uint8Array(n);
  const edges: { a: number; b: number; length: number }[] = [];
  let current = 0;
  done[0] = 1;
  for (let step = 1; step < n; step++) {
    let next = -1;
    for (let j = 0; j < n; j++) {
      if (done[j]) continue;
      const d = distance(current, j);
      if (d < best[j]!) {
        best[j] = d;
        from[j] = current;
      }
      if (next < 0 || best[j]! < best[next]!) next = j;
    }
    edges.push({ a: from[next]!, b: next, length: best[next]! });
    done[next] = 1;
    current = next;
  }
  return edges.sort((x, y) => x.length - y.length);
}

type Dendrogram = { left: number; right: number; length: number; size: number }[];

function condense(
  n: number,
  edges: readonly { a: number; b: number; length: number }[],
  sizeMin: number,
): Node {
  const parent = Int32Array.from({ length: n }, (_, i) => i);
  const nodeOf = Int32Array.from({ length: n }, (_, i) => i);
  const tree: Dendrogram = [];
  const sizeOf = (node: number) => (node < n ? 1 : tree[node - n]!.size);
  for (const { a, b, length } of edges) {
    const x = find(parent, a);
    const y = find(parent, b);
    const left = nodeOf[x]!;
    const right = nodeOf[y]!;
    tree.push({ left, right, length, size: sizeOf(left) + sizeOf(right) });
    parent[y] = x;
    nodeOf[x] = n + tree.length - 1;
  }
  const leaves = (node: number): number[] => {
    const items: number[] = [];
    const stack = [node];
    for (let top = stack.pop(); top !== undefined; top = stack.pop()) {
      if (top < n) items.push(top);
      else stack.push(tree[top - n]!.left, tree[top - n]!.right);
    }
    return items;
  };
  const root: Node = { children: [], size: n, birth: 0, items: [], stability: 0 };
  const stack: { cluster: Node; node: number }[] = [{ cluster: root, node: n + tree.length - 1 }];
  for (let top = stack.pop(); top !== undefined; top = stack.pop()) {
    const { cluster, node } = top;
    if (node < n) {
      cluster.items.push(node);
      continue;
    }
    const { left, right, length } = tree[node - n]!;
    const lambda = lambdaOf(length);
    const gain = (size: number) => size * (lambda - cluster.birth);
    const bigLeft = sizeOf(left) >= sizeMin;
    const bigRight = sizeOf(right) >= sizeMin;
    if (bigLeft && bigRight) {
      cluster.stability += gain(sizeOf(left)) + gain(sizeOf(right));
      for (const side of [left, right]) {
        const child: Node = { children: [], size: sizeOf(side), birth: lambda, items: [], stability: 0 };
        cluster.children.push(child);
        stack.push({ cluster: child, node: side });
      }
      continue;
    }
    for (const [side, big] of [
      [left, bigLeft],
      [right, bigRight],
    ] as const) {
      if (big) stack.push({ cluster, node: side });
      else {
        cluster.stability += gain(sizeOf(side));
        cluster.items.push(...leaves(side));
      }
    }
  }
  return root;
}

/** Identical items have no distance; a finite ceiling keeps the sums of stability finite. */
function lambdaOf(length: number): number {
  return length > 1e-9 ? 1 / length : 1e9;
}

/** The most stable choice among a cluster and its descendants. */
function select(node: Node): Node[] {
  return best(node).chosen;
}

function best(node: Node): { chosen: Node[]; stability: number } {
  if (node.children.length === 0) return { chosen: [node], stability: node.stability };
  const below = node.children.map(best);
  const sum = below.reduce((total, child) => total + child.stability, 0);
  return sum > node.stability
    ? { chosen: below.flatMap((child) => child.chosen), stability: sum }
    : { chosen: [node], stability: node.stability };
}

function collect(node: Node): number[] {
  return [...node.items, ...node.children.flatMap(collect)];
}
