import { hdbscan, meanShift } from "./density";
import { find } from "./linkage";
import type { Item, Pair } from "./prepare";
import type { ConsensusMethod } from "./types";

/** Clusters of item indices, each ascending, in order of their first item; every item is in exactly one. */
export type Clusters = number[][];

/** What a cluster method may look at. */
export type ClusterInput = { readonly items: readonly Item[]; readonly pairs: readonly Pair[] };

/**
 * Gathers the instances of several annotators into objects. Two instances of one annotator are never in one
 * cluster: "average" forbids it while it merges, the other methods keep the best-fitting one and set the rest
 * apart. Same input, same output; ties go to the lower index.
 *
 * - average: agglomerative, average similarity, cannot-link between instances of one annotator
 * - suppression: the instance with most support takes all that overlap it by iouCut, again and again
 * - mean-shift: flat-kernel modes of (centre, size) in units of the local object size
 * - single: chains of similarity of at least iouCut
 * - hdbscan: stable density clusters under 1 - similarity (two instances or more), the rest alone
 * - facility: greedy facility location, an instance serving those most similar to it (Barinova et al., 2012)
 */
export function cluster(input: ClusterInput, method: ConsensusMethod, iouCut: number): Clusters {
  switch (method) {
    case "average":
      return averageLinkage(input, iouCut);
    case "suppression":
      return oneEach(input, suppress(input, iouCut));
    case "mean-shift":
      return oneEach(input, byMeanShift(input));
    case "single":
      return oneEach(input, components(input, iouCut));
    case "hdbscan":
      return oneEach(input, byDensity(input));
    case "facility":
      return oneEach(input, byFacility(input, iouCut));
  }
}

type Link = { similarity: number; a: number; b: number; stampA: number; stampB: number };

/** O(e log e) for e overlapping pairs: absent pairs are similarity 0 and need no storage. */
function averageLinkage({ items, pairs }: ClusterInput, cut: number): Clusters {
  const n = items.length;
  const members: (number[] | null)[] = items.map((_, i) => [i]);
  const sums: Map<number, number>[] = items.map(() => new Map());
  const stamp = new Int32Array(n);
  const heap = new LinkHeap();
  for (const { a, b, similarity } of pairs) {
    sums[a]!.set(b, similarity);
    sums[b]!.set(a, similarity);
    if (similarity >= cut) heap.push({ similarity, a, b, stampA: 0, stampB: 0 });
  }
  for (let link = heap.pop(); link; link = heap.pop()) {
    const { a, b } = link;
    const left = members[a];
    const right = members[b];
    if (!left || !right || stamp[a] !== link.stampA || stamp[b] !== link.stampB) continue;
    const merged = [...left, ...right];
    members[a] = merged;
    members[b] = null;
    stamp[a]!++;
    sums[a]!.delete(b);
    sums[b]!.delete(a);
    for (const [c, sum] of sums[b]!) {
      sums[a]!.set(c, (sums[a]!.get(c) ?? 0) + sum);
      sums[c]!.delete(b);
    }
    for (const [c, sum] of sums[a]!) {
      const others = members[c]!;
      sums[c]!.set(a, sum);
      const similarity = sum / (merged.length * others.length);
      if (similarity < cut || shareAnnotator(items, merged, others)) continue;
      const [low, high] = a < c ? [a, c] : [c, a];
      heap.push({ similarity, a: low, b: high, stampA: stamp[low]!, stampB: stamp[high]! });
    }
  }
  return tidy(members.filter((list) => list !== null));
}

function shareAnnotator(items: readonly Item[], a: readonly number[], b: readonly number[]): boolean {
  for (const i of a) for (const j of b) if (items[i]!.annotator === items[j]!.annotator) return true;
  return false;
}

class LinkHeap {
  private readonly links: Link[] = [];

  push(link: Link): void {
    const { links } = this;
    let at = links.push(link) - 1;
    while (at > 0) {
      const up = (at - 1) >> 1;
      if (!before(link, links[up]!)) break;
      links[at] = links[up]!;
      at = up;
    }
    links[at] = link;
  }

  pop(): Link | undefined {
    const { links } = this;
    const top = links[0];
    const last = links.pop();
    if (top === undefined || last === undefined || links.length === 0) return top;
    let at = 0;
    for (;;) {
      let child = 2 * at + 1;
      if (child >= links.length) break;
      if (child + 1 < links.length && before(links[child + 1]!, links[child]!)) child++;
      if (!before(links[child]!, last)) break;
      links[at] = links[child]!;
      at = child;
    }
    links[at] = last;
    return top;
  }
}

function before(x: Link, y: Link): boolean {
  if (x.similarity !== y.similarity) return x.similarity > y.similarity;
  return x.a !== y.a ? x.a < y.a : x.b < y.b;
}

function tidy(clusters: number[][]): Clusters {
  for (const list of clusters) list.sort((a, b) => a - b);
  return clusters.sort((x, y) => x[0]! - y[0]!);
}

function neighbours({ items, pairs }: ClusterInput): Map<number, number>[] {
  const near: Map<number, number>[] = items.map(() => new Map());
  for (const { a, b, similarity } of pairs) {
    near[a]!.set(b, similarity);
    near[b]!.set(a, similarity);
  }
  return near;
}

/** Keeps each annotator's most similar instance in a cluster; the others become clusters of their own. */
function oneEach(input: ClusterInput, clusters: Clusters): Clusters {
  const near = neighbours(input);
  const kept: Clusters = [];
  for (const list of clusters) {
    const closeness = (i: number) => list.reduce((sum, j) => sum + (i === j ? 0 : (near[i]!.get(j) ?? 0)), 0);
    const best = new Map<number, number>();
    for (const i of list) {
      const { annotator } = input.items[i]!;
      const current = best.get(annotator);
      if (current === undefined || closeness(i) > closeness(current)) best.set(annotator, i);
    }
    const chosen = new Set(best.values());
    kept.push([...chosen]);
    for (const i of list) if (!chosen.has(i)) kept.push([i]);
  }
  return tidy(kept);
}

function suppress(input: ClusterInput, cut: number): Clusters {
  const near = neighbours(input);
  const support = near.map((map) => [...map.values()].reduce((sum, similarity) => sum + similarity, 0));
  const order = input.items.map((_, i) => i).sort((a, b) => support[b]! - support[a]! || a - b);
  const taken = new Uint8Array(input.items.length);
  const clusters: Clusters = [];
  for (const i of order) {
    if (taken[i]) continue;
    taken[i] = 1;
    const list = [i];
    for (const [j, similarity] of near[i]!) {
      if (taken[j] || similarity < cut) continue;
      taken[j] = 1;
      list.push(j);
    }
    clusters.push(list);
  }
  return tidy(clusters);
}

function components({ items, pairs }: ClusterInput, cut: number): Clusters {
  const parent = Int32Array.from({ length: items.length }, (_, i) => i);
  for (const { a, b, similarity } of pairs) if (similarity >= cut) parent[find(parent, b)] = find(parent, a);
  const lists = new Map<number, number[]>();
  items.forEach((_, i) => {
    const root = find(parent, i);
    lists.set(root, [...(lists.get(root) ?? []), i]);
  });
  return tidy([...lists.values()]);
}

/** Least similarity that ties two instances into one neighbourhood, for the methods that work per neighbourhood. */
const NEIGHBOUR_MIN = 0.1;
/** Bandwidth in units of the median object size of the neighbourhood. */
const SHIFT_BANDWIDTH = 0.45;

function byMeanShift(input: ClusterInput): Clusters {
  const clusters: Clusters = [];
  for (const list of components(input, NEIGHBOUR_MIN)) {
    const sizes = list.map((i) => Math.sqrt(input.items[i]!.spans.box[2] * input.items[i]!.spans.box[3]));
    const unit = Math.max(1e-9, [...sizes].sort((a, b) => a - b)[sizes.length >> 1]!);
    const points = list.map((i) => {
      const [x, y, width, height] = input.items[i]!.spans.box;
      return [(x + width / 2) / unit, (y + height / 2) / unit, width / unit, height / unit];
    });
    const { labels } = meanShift(points, SHIFT_BANDWIDTH);
    clusters.push(...byLabel(list, labels));
  }
  return tidy(clusters);
}

function byDensity(input: ClusterInput): Clusters {
  const near = neighbours(input);
  const clusters: Clusters = [];
  for (const list of components(input, NEIGHBOUR_MIN)) {
    const distance = (i: number, j: number) => 1 - (near[list[i]!]!.get(list[j]!) ?? 0);
    const labels = hdbscan(list.length, distance, { clusterSizeMin: 2, samplesMin: 2, allowSingle: true });
    clusters.push(...byLabel(list, labels));
  }
  return tidy(clusters);
}

/** Items of equal label together; -1 is each one alone. */
function byLabel(list: readonly number[], labels: Int32Array): Clusters {
  const lists = new Map<number, number[]>();
  const alone: Clusters = [];
  list.forEach((item, k) => {
    const label = labels[k]!;
    if (label < 0) alone.push([item]);
    else lists.set(label, [...(lists.get(label) ?? []), item]);
  });
  return [...lists.values(), ...alone];
}

/**
 * Cost of opening a facility, in units of similarity: below the 1 - iouCut that a lone instance gains by
 * standing for itself, above what a second exemplar of one object gains.
 */
const FACILITY_COST = 0.5;

function byFacility(input: ClusterInput, cut: number): Clusters {
  const near = neighbours(input);
  near.forEach((map, i) => map.set(i, 1));
  const served = new Float64Array(input.items.length).fill(cut);
  const server = new Int32Array(input.items.length).fill(-1);
  for (;;) {
    let best = -1;
    let bestGain = 0;
    near.forEach((map, j) => {
      let gain = -FACILITY_COST;
      for (const [i, similarity] of map) gain += Math.max(0, similarity - served[i]!);
      if (gain > bestGain + 1e-12) {
        bestGain = gain;
        best = j;
      }
    });
    if (best < 0) break;
    for (const [i, similarity] of near[best]!) {
      if (similarity <= served[i]!) continue;
      served[i] = similarity;
      server[i] = best;
    }
  }
  return tidy(
    byLabel(
      input.items.map((_, i) => i),
      server,
    ),
  );
}
