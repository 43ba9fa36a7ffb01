import type { ImageLabels, LabelledInstance, Reliability } from "./types";
import { boxesMeet, drawnIou, spansOf, type Spans } from "./spans";

/** One drawn instance, ready to be compared. `voter` is its annotator's copy group, or the annotator alone. */
export type Item = {
  readonly annotator: number;
  readonly voter: number;
  readonly instance: LabelledInstance;
  readonly spans: Spans;
};

export type Pair = {
  readonly a: number;
  readonly b: number;
  readonly iou: number;
  readonly similarity: number;
};

export type PreparedImage = {
  readonly width: number;
  readonly height: number;
  /** In order of id, whatever the order of the input. */
  readonly annotatorIds: readonly string[];
  readonly voterOf: Int32Array;
  readonly voterCount: number;
  readonly items: readonly Item[];
  readonly itemsOf: readonly (readonly number[])[];
  /** Pairs of different annotators that overlap; a < b. */
  readonly pairs: readonly Pair[];
};

/** Factor on the IoU of two instances of different classes: a doubt about the class, not proof of two objects. */
export const CLASS_DOUBT = 0.8;

/**
 * Median IoU over an image's matched instances from which two people's labels are taken for one drawing.
 * Independent outlines of experts reach 0.93 to 0.96 (Gupta et al., LVIS, 2019).
 */
export const COPY_IOU_MIN = 0.98;
/** Share of the smaller set that must be matched that closely. */
export const COPY_SHARE_MIN = 0.6;

/** Sorts, rasterises and compares one image's labels. O(n log n + overlapping pairs x rows). */
export function prepareImage(labels: ImageLabels, reliability?: Reliability): PreparedImage {
  const annotators = [...labels.annotators].sort((a, b) => compareText(a.annotatorId, b.annotatorId));
  const annotatorIds = annotators.map(({ annotatorId }) => annotatorId);
  const drawn: { annotator: number; instance: LabelledInstance; spans: Spans }[] = [];
  annotators.forEach(({ instances }, annotator) => {
    for (const instance of [...instances].sort((a, b) => compareText(a.id, b.id))) {
      drawn.push({ annotator, instance, spans: spansOf(instance.shape) });
    }
  });
  const pairs = overlappingPairs(drawn);
  const voterOf = voters(annotatorIds, drawn, pairs, reliability);
  const items = drawn.map((item) => ({ ...item, voter: voterOf[item.annotator]! }));
  const itemsOf: number[][] = annotatorIds.map(() => []);
  items.forEach((item, index) => itemsOf[item.annotator]!.push(index));
  const voterCount = new Set(voterOf).size;
  return {
    width: labels.width,
    height: labels.height,
    annotatorIds,
    voterOf,
    voterCount,
    items,
    itemsOf,
    pairs,
  };
}

/** Order by code units: the same on every machine, whatever its locale. */
export function compareText(a: string, b: string): number {
  return a < b ? -1 : a > b ? 1 : 0;
}

function overlappingPairs(
  drawn: readonly { annotator: number; instance: LabelledInstance; spans: Spans }[],
): Pair[] {
  const order = drawn
    .map((_, i) => i)
    .sort((a, b) => drawn[a]!.spans.box[0] - drawn[b]!.spans.box[0] || a - b);
  const pairs: Pair[] = [];
  let open: number[] = [];
  for (const i of order) {
    const item = drawn[i]!;
    open = open.filter((j) => drawn[j]!.spans.box[0] + drawn[j]!.spans.box[2] > item.spans.box[0]);
    for (const j of open) {
      const other = drawn[j]!;
      if (other.annotator === item.annotator || !boxesMeet(item.spans.box, other.spans.box)) continue;
      if (Boolean(item.instance.crowd) !== Boolean(other.instance.crowd)) continue;
      const iou = drawnIou(item.spans, other.spans);
      if (iou <= 0) continue;
      const similarity = item.instance.classId === other.instance.classId ? iou : iou * CLASS_DOUBT;
      pairs.push(i < j ? { a: i, b: j, iou, similarity } : { a: j, b: i, iou, similarity });
    }
    open.push(i);
  }
  return pairs.sort((p, q) => p.a - q.a || p.b - q.b);
}

/** Whether two annotators' labels of this image are so alike that one was copied from the other. */
export function areCopies(
  matchedIous: readonly number[],
  sizeA: number,
  sizeB: number,
  knownToCopy: boolean,
): boolean {
  const close = matchedIous.filter((iou) => iou >= COPY_IOU_MIN).length;
  // One or two close outlines happen by chance, above all on boxes of clear objects.
  return close >= (knownToCopy ? 1 : 3) && close >= COPY_SHARE_MIN * Math.min(sizeA, sizeB);
}

function voters(
  annotatorIds: readonly string[],
  drawn: readonly { annotator: number; instance: LabelledInstance }[],
  pairs: readonly Pair[],
  reliability: Reliability | undefined,
): Int32Array {
  const count = annotatorIds.length;
  const voterOf = Int32Array.from({ length: count }, (_, i) => i);
  const join = (a: number, b: number) => {
    const from = Math.max(voterOf[a]!, voterOf[b]!);
    const to = Math.min(voterOf[a]!, voterOf[b]!);
    for (let k = 0; k < count; k++) if (voterOf[k] === from) voterOf[k] = to;
  };
  for (const group of reliability?.copies ?? []) {
    const here = group.annotatorIds.map((id) => annotatorIds.indexOf(id)).filter((index) => index >= 0);
    for (const index of here) join(here[0]!, index);
  }
  const sizes = new Int32Array(count);
  for (const item of drawn) sizes[item.annotator]!++;
  const known = (k: number) => Boolean(reliability?.annotators[annotatorIds[k]!]?.copyOf);
  const close = new Map<number, number[]>();
  for (const { a, b, iou } of pairs) {
    if (iou < COPY_IOU_MIN || tookTheSame(drawn[a]!.instance, drawn[b]!.instance)) continue;
    const from = drawn[a]!.annotator;
    const to = drawn[b]!.annotator;
    const key = Math.min(from, to) * count + Math.max(from, to);
    const list = close.get(key);
    if (list) list.push(iou);
    else close.set(key, [iou]);
  }
  for (const [key, ious] of close) {
    const a = Math.floor(key / count);
    const b = key % count;
    if (areCopies(ious, sizes[a]!, sizes[b]!, known(a) || known(b))) join(a, b);
  }
  return voterOf;
}

/** Two people who started from the same proposal are alike for an honest reason. */
export function tookTheSame(a: LabelledInstance, b: LabelledInstance): boolean {
  return a.proposalId != null && a.proposalId === b.proposalId;
}
