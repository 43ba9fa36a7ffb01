import type { Lab } from "./lab";

/** A partition of a picture: `label[pixel]` is 0 .. count - 1. */
export type Segments = { width: number; height: number; label: Int32Array; count: number };

const WEIGHT_STEPS = 2048;

/**
 * Graph segmentation (Felzenszwalb and Huttenlocher, IJCV 2004) on 8 neighbours in Lab: two components join
 * when the lightest edge between them is no heavier than the heaviest inside either plus k / size. Components
 * under `sizeMin` px join their nearest neighbour. Edges are sorted by counting, weights to 1/2048 of the
 * range. O(pixels).
 */
export function segment(lab: Lab, k: number, sizeMin: number): Segments {
  const { width, height, l, a, b } = lab;
  const count = width * height;
  const edgesMax = count * 4;
  const from = new Int32Array(edgesMax);
  const to = new Int32Array(edgesMax);
  const weight = new Float32Array(edgesMax);
  let edges = 0;
  let heaviest = 0;
  const put = (i: number, j: number) => {
    const dl = l[i]! - l[j]!;
    const da = a[i]! - a[j]!;
    const db = b[i]! - b[j]!;
    const w = Math.sqrt(dl * dl + da * da + db * db);
    from[edges] = i;
    to[edges] = j;
    weight[edges++] = w;
    if (w > heaviest) heaviest = w;
  };
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const i = y * width + x;
      if (x + 1 < width) put(i, i + 1);
      if (y + 1 < height) put(i, i + width);
      if (x + 1 < width && y + 1 < height) put(i, i + width + 1);
      if (x > 0 && y + 1 < height) put(i, i + width - 1);
    }
  }
  const order = countingSort(weight, edges, heaviest);
  const parent = new Int32Array(count);
  for (let i = 0; i < count; i++) parent[i] = i;
  const size = new Int32Array(count).fill(1);
  const limit = new Float32Array(count).fill(k);
  const find = (i: number) => {
    let root = i;
    while (parent[root] !== root) root = parent[root]!;
    for (let at = i; at !== root;) {
      const next = parent[at]!;
      parent[at] = root;
      at = next;
    }
    return root;
  };
  const join = (p: number, q: number) => {
    const [big, small] = size[p]! >= size[q]! ? [p, q] : [q, p];
    parent[small] = big;
    size[big] = size[big]! + size[small]!;
    return big;
  };
  for (let n = 0; n < edges; n++) {
    const e = order[n]!;
    const p = find(from[e]!);
    const q = find(to[e]!);
    if (p === q || weight[e]! > limit[p]! || weight[e]! > limit[q]!) continue;
    const root = join(p, q);
    limit[root] = weight[e]! + k / size[root]!;
  }
  for (let n = 0; n < edges; n++) {
    const e = order[n]!;
    const p = find(from[e]!);
    const q = find(to[e]!);
    if (p !== q && (size[p]! < sizeMin || size[q]! < sizeMin)) join(p, q);
  }
  const label = new Int32Array(count);
  const names = new Int32Array(count).fill(-1);
  let named = 0;
  for (let i = 0; i < count; i++) {
    const root = find(i);
    if (names[root]! < 0) names[root] = named++;
    label[i] = names[root]!;
  }
  return { width, height, label, count: named };
}

function countingSort(weight: Float32Array, edges: number, heaviest: number): Int32Array {
  const scale = heaviest > 0 ? (WEIGHT_STEPS - 1) / heaviest : 0;
  const starts = new Int32Array(WEIGHT_STEPS + 1);
  for (let e = 0; e < edges; e++) starts[((weight[e]! * scale) | 0) + 1]!++;
  for (let step = 0; step < WEIGHT_STEPS; step++) starts[step + 1] = starts[step + 1]! + starts[step]!;
  const order = new Int32Array(edges);
  for (let e = 0; e < edges; e++) {
    const step = (weight[e]! * scale) | 0;
    order[starts[step]!++] = e;
  }
  return order;
}
