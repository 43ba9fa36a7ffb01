export type LinkageRule = "single" | "average" | "complete";

export type Merge = { a: number; b: number; height: number; size: number };

/**
 * Agglomerative clustering of a condensed distance matrix (upper triangle, row-major, n(n-1)/2 values) by
 * the nearest-neighbour chain. Leaves are 0..n-1, the k-th merge (by height) makes node n+k. Heights never
 * fall. O(n²) time and space. Source: Lance and Williams, 1967; Murtagh, 1983.
 */
export function linkage(distance: ArrayLike<number>, n: number, rule: LinkageRule): Merge[] {
  const full = new Float64Array(n * n);
  for (let i = 0, k = 0; i < n; i++) {
    for (let j = i + 1; j < n; j++, k++) full[i * n + j] = full[j * n + i] = distance[k]!;
  }
  const size = new Int32Array(n).fill(1);
  const alive = new Uint8Array(n).fill(1);
  const chain: number[] = [];
  const raw: { a: number; b: number; height: number }[] = [];
  while (raw.length < n - 1) {
    if (chain.length === 0) chain.push(alive.indexOf(1));
    for (;;) {
      const tip = chain[chain.length - 1]!;
      const before = chain[chain.length - 2] ?? -1;
      let nearest = before;
      let best = before < 0 ? Infinity : full[tip * n + before]!;
      for (let j = 0; j < n; j++) {
        if (alive[j] && j !== tip && full[tip * n + j]! < best) {
          best = full[tip * n + j]!;
          nearest = j;
        }
      }
      if (nearest !== before) {
        chain.push(nearest);
        continue;
      }
      chain.length -= 2;
      const keep = Math.min(tip, nearest);
      const drop = Math.max(tip, nearest);
      raw.push({ a: keep, b: drop, height: best });
      for (let j = 0; j < n; j++) {
        if (!alive[j] || j === keep || j === drop) continue;
        const x = full[keep * n + j]!;
        const y = full[drop * n + j]!;
        const joined =
          rule === "single"
            ? Math.min(x, y)
            : rule === "complete"
              ? Math.max(x, y)
              : (x * size[keep]! + y * size[drop]!) / (size[keep]! + size[drop]!);
        full[keep * n + j] = full[j * n + keep] = joined;
      }
      size[keep]! += size[drop]!;
      alive[drop] = 0;
      break;
    }
  }
  raw.sort((x, y) => x.height - y.height);
  const nodeOf = Int32Array.from({ length: n }, (_, i) => i);
  const parent = Int32Array.from({ length: n }, (_, i) => i);
  const count = new Int32Array(n).fill(1);
  return raw.map(({ a, b, height }, k) => {
    const x = find(parent, a);
    const y = find(parent, b);
    const merge = { a: nodeOf[x]!, b: nodeOf[y]!, height, size: count[x]! + count[y]! };
    parent[y] = x;
    count[x] = merge.size;
    nodeOf[x] = n + k;
    return merge;
  });
}

/** Clusters whose members are joined at a height of at most `heightMax`; labels 0.. in order of first member. */
export function cutLinkage(merges: readonly Merge[], n: number, heightMax: number): Int32Array {
  const parent = Int32Array.from({ length: 2 * n }, (_, i) => i);
  merges.forEach(({ a, b, height }, k) => {
    if (height > heightMax) return;
    parent[find(parent, a)] = n + k;
    parent[find(parent, b)] = n + k;
  });
  return relabel(Int32Array.from({ length: n }, (_, i) => find(parent, i)));
}

/** Renames labels to 0, 1, ... in order of first appearance; negative labels (noise) stay -1. */
export function relabel(labels: Int32Array): Int32Array {
  const names = new Map<number, number>();
  return labels.map((label) => {
    if (label < 0) return -1;
    const name = names.get(label) ?? names.size;
    names.set(label, name);
    return name;
  });
}

/** Root of `i` in a union-find forest, halving the path on the way. */
export function find(parent: Int32Array, i: number): number {
  while (parent[i] !== i) {
    parent[i] = parent[parent[i]!]!;
    i = parent[i]!;
  }
  return i;
}
