import type { Gradient } from "@/lib/vision/gradient";
import type { Lab } from "@/lib/vision/lab";
import type { Segments } from "@/lib/vision/segments";

const COLOUR_BINS = 12;
const COLOUR = 3 * COLOUR_BINS;
/** Directions of the gradient, as `gradientOf` was asked for. */
export const DIRECTIONS = 8;
const STRENGTHS = 4;
const TEXTURE = DIRECTIONS + STRENGTHS;
const BINS = COLOUR + TEXTURE;

/** How two neighbours are compared: by what they look like, or by how weak the border between them is. */
export type Likeness = "appearance" | "border";

/** Numbers of a region that its neighbourhood gives; order is part of the learned weights. */
export const REGION_FEATURES = 21;

/**
 * A binary tree of regions over one segmentation: nodes 0 .. leaves - 1 are its segments, each later node the union of
 * two. Boxes are half-open px ranges.
 */
export type Hierarchy = {
  segments: Segments;
  leaves: number;
  count: number;
  left: Int32Array;
  top: Int32Array;
  right: Int32Array;
  bottom: Int32Array;
  areaPx2: Float64Array;
  firstChild: Int32Array;
  secondChild: Int32Array;
  /** count x REGION_FEATURES. */
  features: Float32Array;
  /** Mean L, a, b of each node. */
  colour: Float32Array;
};

/** What the pixels of each segment add up to; made once for all groupings of a segmentation. */
export type Leaves = {
  segments: Segments;
  left: Int32Array;
  top: Int32Array;
  right: Int32Array;
  bottom: Int32Array;
  areaPx2: Float64Array;
  edge: Float64Array;
  inner: Float64Array;
  colour: Float32Array;
  histogram: Float32Array;
  /** For each segment its neighbours, and where their common border is found. */
  links: readonly Map<number, number>[];
  linkLength: number[];
  linkStrength: number[];
};

/** Histogram bins of each pixel, 5 a pixel; made once for all segmentations of a picture. O(pixels). */
export function pixelBins({ l, a, b }: Lab, { strength, direction }: Gradient): Uint8Array {
  const bins = new Uint8Array(l.length * 5);
  const bin = (value: number, low: number, high: number) =>
    Math.min(COLOUR_BINS - 1, Math.max(0, (((value - low) / (high - low)) * COLOUR_BINS) | 0));
  for (let i = 0, at = 0; i < l.length; i++, at += 5) {
    const s = strength[i]!;
    bins[at] = bin(l[i]!, 0, 100);
    bins[at + 1] = COLOUR_BINS + bin(a[i]!, -40, 50);
    bins[at + 2] = 2 * COLOUR_BINS + bin(b[i]!, -40, 55);
    bins[at + 3] = COLOUR + direction[i]!;
    bins[at + 4] = COLOUR + DIRECTIONS + (s < 0.7 ? 0 : s < 2 ? 1 : s < 5 ? 2 : 3);
  }
  return bins;
}

/** O(pixels). */
export function leavesFrom(
  segments: Segments,
  { l, a, b }: Lab,
  { strength }: Gradient,
  bins: Uint8Array,
): Leaves {
  const { width, height, label, count } = segments;
  const left = new Int32Array(count).fill(width);
  const top = new Int32Array(count).fill(height);
  const right = new Int32Array(count);
  const bottom = new Int32Array(count);
  const areaPx2 = new Float64Array(count);
  const edge = new Float64Array(count);
  const inner = new Float64Array(count);
  const colour = new Float32Array(count * 3);
  const histogram = new Float32Array(count * BINS);
  const links = Array.from({ length: count }, () => new Map<number, number>());
  const linkLength: number[] = [];
  const linkStrength: number[] = [];
  const touch = (p: number, q: number, value: number) => {
    let link = links[p]!.get(q);
    if (link === undefined) {
      link = linkLength.length;
      linkLength.push(0);
      linkStrength.push(0);
      links[p]!.set(q, link);
      links[q]!.set(p, link);
    }
    linkLength[link]! += 1;
    linkStrength[link]! += value;
  };
  for (let y = 0, i = 0; y < height; y++) {
    const isRim = y === 0 || y === height - 1;
    for (let x = 0; x < width; x++, i++) {
      const node = label[i]!;
      if (x < left[node]!) left[node] = x;
      if (x >= right[node]!) right[node] = x + 1;
      if (y < top[node]!) top[node] = y;
      bottom[node] = y + 1;
      areaPx2[node]! += 1;
      if (isRim || x === 0 || x === width - 1) edge[node]! += 1;
      colour[node * 3]! += l[i]!;
      colour[node * 3 + 1]! += a[i]!;
      colour[node * 3 + 2]! += b[i]!;
      const s = strength[i]!;
      inner[node]! += s;
      const at = node * BINS;
      const from = i * 5;
      histogram[at + bins[from]!]! += 1;
      histogram[at + bins[from + 1]!]! += 1;
      histogram[at + bins[from + 2]!]! += 1;
      histogram[at + bins[from + 3]!]! += s < 4 ? s / 4 : 1;
      histogram[at + bins[from + 4]!]! += 1;
      if (x + 1 < width && label[i + 1] !== node) touch(node, label[i + 1]!, (s + strength[i + 1]!) / 2);
      if (y + 1 < height && label[i + width] !== node)
        touch(node, label[i + width]!, (s + strength[i + width]!) / 2);
    }
  }
  for (let node = 0; node < count; node++) {
    const area = areaPx2[node]!;
    for (let c = 0; c < 3; c++) colour[node * 3 + c]! /= area;
    for (let n = 0; n < COLOUR; n++) histogram[node * BINS + n]! /= 3 * area;
    for (let n = COLOUR; n < BINS; n++) histogram[node * BINS + n]! /= 2 * area;
  }
  return {
    segments,
    left,
    top,
    right,
    bottom,
    areaPx2,
    edge,
    inner,
    colour,
    histogram,
    links,
    linkLength,
    linkStrength,
  };
}

function grown(values: Int32Array, length: number): Int32Array {
  const longer = new Int32Array(length);
  longer.set(values);
  return longer;
}

/**
 * Hierarchical grouping (Uijlings et al., IJCV 2013): the two neighbours most alike join, again and again, until one
 * region is left. `appearance` adds intersections of colour and texture histograms, smallness and fit, as
 * published; `border` joins across the weakest mean gradient, small regions first (after Arbeláez et al., 2011).
 * Deterministic: ties go to the earlier pair. O(pixels + segments log segments x neighbours).
 */
export function groupSegments(known: Leaves, likeness: Likeness): Hierarchy {
  const { segments } = known;
  const { width, height, count: leaves } = segments;
  const total = 2 * leaves - 1;
  const pixels = width * height;
  const left = grown(known.left, total);
  const top = grown(known.top, total);
  const right = grown(known.right, total);
  const bottom = grown(known.bottom, total);
  const areaPx2 = new Float64Array(total);
  areaPx2.set(known.areaPx2);
  const edge = new Float64Array(total);
  edge.set(known.edge);
  const inner = new Float64Array(total);
  inner.set(known.inner);
  const colour = new Float32Array(total * 3);
  colour.set(known.colour);
  const histogram = new Float32Array(total * BINS);
  histogram.set(known.histogram);
  const firstChild = new Int32Array(total).fill(-1);
  const secondChild = new Int32Array(total).fill(-1);
  const parent = new Int32Array(total).fill(-1);
  const born = new Float32Array(total);
  const parts = new Int32Array(total).fill(1, 0, leaves);
  const features = new Float32Array(total * REGION_FEATURES);
  const links = known.links.map((own) => new Map(own));
  const linkLength = known.linkLength.slice();
  const linkStrength = known.linkStrength.slice();

  const alike = (p: number, q: number, from: number, to: number) => {
    let sum = 0;
    for (let n = from; n < to; n++) {
      const x = histogram[p * BINS + n]!;
      const y = histogram[q * BINS + n]!;
      sum += x < y ? x : y;
    }
    return sum;
  };
  const score = (p: number, q: number, link: number): number => {
    const area = areaPx2[p]! + areaPx2[q]!;
    if (likeness === "border") {
      const small = Math.min(areaPx2[p]!, areaPx2[q]!) / pixels;
      return -(linkStrength[link]! / linkLength[link]!) * (small + 0.003) ** 0.25;
    }
    const w = Math.max(right[p]!, right[q]!) - Math.min(left[p]!, left[q]!);
    const h = Math.max(bottom[p]!, bottom[q]!) - Math.min(top[p]!, top[q]!);
    return alike(p, q, 0, COLOUR) + alike(p, q, COLOUR, BINS) + 2 - area / pixels - (w * h - area) / pixels;
  };

  const describe = (node: number) => {
    let length = 0;
    let sum = 0;
    let colourAlike = 0;
    let textureAlike = 0;
    let distance = 0;
    let most = 0;
    let weakest = Infinity;
    let weak = 0;
    let compared = 0;
    for (const link of links[node]!.values()) length += linkLength[link]!;
    for (const [other, link] of links[node]!) {
      const own = linkLength[link]!;
      const mean = linkStrength[link]! / own;
      sum += linkStrength[link]!;
      if (mean < 2) weak += own;
      // Neighbours along a sliver of the border say little and would cost the most.
      if (own < 0.04 * length) continue;
      const same = alike(node, other, 0, COLOUR);
      compared += own;
      colourAlike += own * same;
      textureAlike += own * alike(node, other, COLOUR, BINS);
      const d0 = colour[node * 3]! - colour[other * 3]!;
      const d1 = colour[node * 3 + 1]! - colour[other * 3 + 1]!;
      const d2 = colour[node * 3 + 2]! - colour[other * 3 + 2]!;
      distance += own * Math.sqrt(d0 * d0 + d1 * d1 + d2 * d2);
      if (own >= 0.08 * length) {
        if (same > most) most = same;
        if (mean < weakest) weakest = mean;
      }
    }
    const area = areaPx2[node]!;
    const w = right[node]! - left[node]!;
    const h = bottom[node]! - top[node]!;
    const border = length > 0 ? sum / length : 0;
    const texture = inner[node]! / area;
    let entropy = 0;
    for (let n = 0; n < COLOUR; n++) {
      const share = 3 * histogram[node * BINS + n]!;
      if (share > 0) entropy -= share * Math.log(share);
    }
    const perimeter = length + edge[node]!;
    const at = node * REGION_FEATURES;
    features[at] = Math.log2(1 + border);
    features[at + 1] = Math.log2(1 + texture);
    features[at + 2] = border / (border + texture + 0.1);
    features[at + 3] = Math.log2(1 + (weakest === Infinity ? 0 : weakest));
    features[at + 4] = compared > 0 ? colourAlike / compared : 1;
    features[at + 5] = compared > 0 ? textureAlike / compared : 1;
    features[at + 6] = most;
    features[at + 7] = Math.log2(1 + (compared > 0 ? distance / compared : 0));
    features[at + 8] = length > 0 ? weak / length : 1;
    features[at + 9] = edge[node]! / (perimeter + 1);
    features[at + 10] = area / (w * h);
    features[at + 11] = Math.min(1.2, (4 * Math.PI * area) / (perimeter * perimeter));
    features[at + 12] = Math.log2(area);
    features[at + 13] = Math.log2(parts[node]!);
    features[at + 14] = entropy;
    features[at + 15] = colour[node * 3]! / 50 - 1;
    features[at + 16] = colour[node * 3 + 1]! / 20;
    features[at + 17] = colour[node * 3 + 2]! / 20;
  };

  const heap = new PairHeap();
  for (let node = 0; node < leaves; node++) {
    describe(node);
    for (const [other, link] of links[node]!)
      if (node < other) heap.push(score(node, other, link), node, other);
  }
  const live = new Uint8Array(total).fill(1, 0, leaves);
  let count = leaves;
  while (heap.size > 0) {
    const { score: how, a: p, b: q } = heap.pop();
    if (!live[p] || !live[q]) continue;
    const node = count++;
    live[p] = live[q] = 0;
    live[node] = 1;
    firstChild[node] = p;
    secondChild[node] = q;
    parent[p] = parent[q] = node;
    born[node] = how;
    parts[node] = parts[p]! + parts[q]!;
    left[node] = Math.min(left[p]!, left[q]!);
    top[node] = Math.min(top[p]!, top[q]!);
    right[node] = Math.max(right[p]!, right[q]!);
    bottom[node] = Math.max(bottom[p]!, bottom[q]!);
    const area = (areaPx2[node] = areaPx2[p]! + areaPx2[q]!);
    edge[node] = edge[p]! + edge[q]!;
    inner[node] = inner[p]! + inner[q]!;
    const shareP = areaPx2[p]! / area;
    const shareQ = 1 - shareP;
    for (let c = 0; c < 3; c++)
      colour[node * 3 + c] = shareP * colour[p * 3 + c]! + shareQ * colour[q * 3 + c]!;
    for (let n = 0; n < BINS; n++)
      histogram[node * BINS + n] = shareP * histogram[p * BINS + n]! + shareQ * histogram[q * BINS + n]!;
    const own = new Map<number, number>();
    for (const child of [p, q]) {
      for (const [other, link] of links[child]!) {
        if (other === p || other === q) continue;
        const known = own.get(other);
        if (known === undefined) own.set(other, link);
        else {
          linkLength[known]! += linkLength[link]!;
          linkStrength[known]! += linkStrength[link]!;
        }
        links[other]!.delete(child);
      }
    }
    links.push(own);
    for (const [other, link] of own) {
      links[other]!.set(node, link);
      heap.push(score(node, other, link), other, node);
    }
    describe(node);
  }
  for (let node = 0; node < count; node++) {
    const up = parent[node]!;
    const at = node * REGION_FEATURES;
    // How long a region lasts before it joins another: true objects outlive their parts.
    features[at + 18] = up < 0 ? 0 : Math.min(4, Math.log2(areaPx2[up]! / areaPx2[node]!));
    features[at + 19] = up < 0 || node < leaves ? 0 : Math.max(-1, Math.min(1, born[node]! - born[up]!));
    features[at + 20] = up < 0 ? 0 : born[up]! / 4;
  }
  return {
    segments,
    leaves,
    count,
    left,
    top,
    right,
    bottom,
    areaPx2,
    firstChild,
    secondChild,
    features,
    colour,
  };
}

/** The segments that make up a node. O(segments of the node). */
export function leavesOf({ firstChild, secondChild }: Hierarchy, node: number): number[] {
  const found: number[] = [];
  const stack = [node];
  for (let top = stack.pop(); top !== undefined; top = stack.pop()) {
    if (firstChild[top]! < 0) found.push(top);
    else stack.push(firstChild[top]!, secondChild[top]!);
  }
  return found;
}

/** Highest score first; ties to the earlier pair, so that a grouping is the same on every machine. */
class PairHeap {
  private readonly scores: number[] = [];
  private readonly firsts: number[] = [];
  private readonly seconds: number[] = [];
  private readonly heap: number[] = [];

  get size(): number {
    return this.heap.length;
  }

  push(score: number, a: number, b: number): void {
    const pair = this.scores.length;
    this.scores.push(score);
    this.firsts.push(a);
    this.seconds.push(b);
    const { heap } = this;
    let i = heap.length;
    heap.push(pair);
    while (i > 0) {
      const up = (i - 1) >> 1;
      if (!this.isBefore(pair, heap[up]!)) break;
      heap[i] = heap[up]!;
      i = up;
    }
    heap[i] = pair;
  }

  pop(): { score: number; a: number; b: number } {
    const { heap } = this;
    const first = heap[0]!;
    const last = heap.pop()!;
    const end = heap.length;
    let i = 0;
    while (end > 0) {
      let child = 2 * i + 1;
      if (child >= end) break;
      if (child + 1 < end && this.isBefore(heap[child + 1]!, heap[child]!)) child++;
      if (!this.isBefore(heap[child]!, last)) break;
      heap[i] = heap[child]!;
      i = child;
    }
    if (end > 0) heap[i] = last;
    return { score: this.scores[first]!, a: this.firsts[first]!, b: this.seconds[first]! };
  }

  private isBefore(p: number, q: number): boolean {
    const sp = this.scores[p]!;
    const sq = this.scores[q]!;
    if (sp !== sq) return sp > sq;
    if (this.firsts[p] !== this.firsts[q]) return this.firsts[p]! < this.firsts[q]!;
    return this.seconds[p]! < this.seconds[q]!;
  }
}
