import type { Clusters } from "./cluster";
import type { PreparedImage } from "./prepare";
import { boxesMeet, drawnIou, overlapOf, type Spans } from "./spans";
import type { Reliability } from "./types";

/** Something that may be an object, with everything that speaks for it. */
export type Candidate = {
  /** Items drawn for this object, at most one an annotator; ascending. */
  readonly members: readonly number[];
  /** Further pieces of the object by annotators who drew it in parts. */
  readonly parts: readonly number[];
  /** Items that cover this object together with others. */
  readonly coverers: readonly number[];
  /** What each annotator says: an item index, or -1 for nothing. */
  readonly saidBy: Int32Array;
  /** The member that resembles the others most. */
  readonly medoid: number;
  /** Mean IoU over all pairs of members; NaN for a single one. */
  readonly meanPairIou: number;
};

export type Explanation =
  | { readonly reason: "part-of" | "duplicate"; readonly of: number }
  | { readonly reason: "covers-several"; readonly of: readonly number[] };

export type Candidates = {
  readonly list: readonly Candidate[];
  /** Items that are no object of their own, with the candidates that explain them. */
  readonly explained: ReadonlyMap<number, Explanation>;
};

/** More people, and people who are trusted more: one person's word never explains away another's. */
function outweighs(a: Draft, b: Draft): boolean {
  return a.voters > b.voters && a.weight > b.weight;
}

/** Share of a covered object's area that the covering instance holds at least. */
const COVERED_MIN = 0.6;
/** Share of the covering instance that is made up of the objects it covers. */
const FILLED_MIN = 0.5;
/** A united outline may have this many times the weight of each object that it covers, if two people drew those. */
const COVERER_WEIGHT_MAX = 1.6;
/** Share of a part's area that lies in the whole. */
const PART_INSIDE_MIN = 0.75;
/** A part is at most this share of the whole; above, it is a loose outline of the whole. */
const PART_SIZE_MAX = 0.8;

/**
 * Clusters become candidates. With `explain`, a weakly supported cluster whose every instance merely divides or unites
 * objects that more people drew (same class) is dissolved: what it covers gains the vote, nobody gains a
 * false object. O(clusters² in contact x rows).
 */
export function candidatesOf(
  image: PreparedImage,
  clusters: Clusters,
  options: { explain: boolean; iouCut: number; reliability?: Reliability | undefined },
): Candidates {
  const iouOf = pairLookup(image);
  const drafts = clusters.map((members) => draft(image, members, iouOf, options.reliability));
  const dissolved = new Set<number>();
  const explained = new Map<number, { reason: "part-of" | "duplicate" | "covers-several"; of: number[] }>();
  if (options.explain) {
    for (const [item, of] of takeOutCoverers(image, drafts, (members) =>
      draft(image, members, iouOf, options.reliability),
    )) {
      explained.set(item, { reason: "covers-several", of });
    }
    // Strongest first: what explains a cluster is then never itself explained away later.
    const order = drafts.map((_, c) => c).sort((a, b) => drafts[b]!.weight - drafts[a]!.weight || a - b);
    for (const c of order) {
      const found = drafts[c]!.members.map((item) =>
        explainItem(image, drafts, dissolved, c, item, options.iouCut),
      );
      if (found.some((explanation) => explanation === undefined)) continue;
      dissolved.add(c);
      drafts[c]!.members.forEach((item, k) => explained.set(item, found[k]!));
    }
  }
  const kept = drafts.map((_, c) => c).filter((c) => !dissolved.has(c));
  const indexOf = new Map(kept.map((c, index) => [c, index]));
  const partsOf = new Map<number, number[]>();
  const coverersOf = new Map<number, number[]>();
  const final = new Map<number, Explanation>();
  for (const [item, { reason, of }] of [...explained].sort(([a], [b]) => a - b)) {
    if (reason === "covers-several") {
      // An object given a vote by what was taken out of a cluster may since have been explained itself.
      const standing = of.filter((c) => indexOf.has(c));
      final.set(item, { reason, of: standing.map((c) => indexOf.get(c)!) });
      for (const c of standing) coverersOf.set(c, [...(coverersOf.get(c) ?? []), item]);
    } else {
      const first = of[0]!;
      final.set(item, { reason, of: indexOf.get(first)! });
      if (reason === "part-of") partsOf.set(first, [...(partsOf.get(first) ?? []), item]);
    }
  }
  const list = kept.map((c): Candidate => {
    const { members, medoid, meanPairIou } = drafts[c]!;
    const parts = partsOf.get(c) ?? [];
    const coverers = coverersOf.get(c) ?? [];
    const saidBy = new Int32Array(image.annotatorIds.length).fill(-1);
    for (const item of [...coverers, ...parts, ...members]) saidBy[image.items[item]!.annotator] = item;
    return { members, parts, coverers, saidBy, medoid, meanPairIou };
  });
  return { list, explained: final };
}

/** A coverer is at least this much larger than the object whose cluster it fell into. */
const COVERER_SIZE_MIN = 1.3;

/**
 * One outline round two objects still overlaps each of them by half, so it can fall into the cluster of one.
 * Where more people drew either object alone, it is taken out of the cluster (`drafts` is updated) and given to
 * all that it covers. Returns the clusters that each such item covers.
 */
function takeOutCoverers(
  image: PreparedImage,
  drafts: Draft[],
  redraft: (members: readonly number[]) => Draft,
): Map<number, number[]> {
  const covers = new Map<number, number[]>();
  const count = drafts.length;
  for (let c = 0; c < count; c++) {
    if (drafts[c]!.members.length < 2) continue;
    const out = new Map<number, number[]>();
    for (let d = 0; d < count; d++) {
      const other = drafts[d]!;
      if (d === c || other.classId !== drafts[c]!.classId) continue;
      const suspects = drafts[c]!.members.filter((item) => {
        const { spans, annotator, instance } = image.items[item]!;
        if (instance.classId !== other.classId || instance.crowd || !boxesMeet(spans.box, other.spans.box))
          return false;
        if (other.members.some((member) => image.items[member]!.annotator === annotator)) return false;
        const { commonPx2, bPx2 } = overlapOf(spans, other.spans);
        return commonPx2 >= COVERED_MIN * bPx2;
      });
      if (suspects.length === 0 || suspects.length === drafts[c]!.members.length) continue;
      const rest = redraft(drafts[c]!.members.filter((item) => !suspects.includes(item)));
      const united = redraft(suspects);
      if (!outweighs(rest, united) || !outweighs(other, united)) continue;
      for (const item of suspects) {
        const { spans } = image.items[item]!;
        const { commonPx2, bPx2 } = overlapOf(spans, rest.spans);
        if (commonPx2 < COVERED_MIN * bPx2 || spans.areaPx2 < COVERER_SIZE_MIN * rest.spans.areaPx2) continue;
        out.set(item, [...(out.get(item) ?? [c]), d]);
      }
    }
    if (out.size === 0) continue;
    drafts[c] = redraft(drafts[c]!.members.filter((item) => !out.has(item)));
    for (const [item, of] of out) covers.set(item, of);
  }
  return covers;
}

type Draft = {
  members: readonly number[];
  medoid: number;
  meanPairIou: number;
  weight: number;
  voters: number;
  classId: string;
  spans: Spans;
};

function pairLookup(image: PreparedImage): (a: number, b: number) => number {
  const n = image.items.length;
  const ious = new Map<number, number>();
  for (const { a, b, iou } of image.pairs) ious.set(a * n + b, iou);
  return (a, b) => ious.get(a < b ? a * n + b : b * n + a) ?? 0;
}

function draft(
  image: PreparedImage,
  members: readonly number[],
  iouOf: (a: number, b: number) => number,
  reliability: Reliability | undefined,
): Draft {
  const sums = members.map((i) => members.reduce((sum, j) => sum + (i === j ? 0 : iouOf(i, j)), 0));
  let best = 0;
  sums.forEach((sum, k) => {
    if (sum > sums[best]! + 1e-12) best = k;
  });
  const pairCount = (members.length * (members.length - 1)) / 2;
  const total = sums.reduce((sum, value) => sum + value, 0) / 2;
  const perVoter = new Map<number, number>();
  const perClass = new Map<string, number>();
  for (const item of members) {
    const { voter, annotator, instance } = image.items[item]!;
    const weight = reliability?.annotators[image.annotatorIds[annotator]!]?.quality ?? 0.7;
    perVoter.set(voter, Math.max(perVoter.get(voter) ?? 0, weight));
    perClass.set(instance.classId, (perClass.get(instance.classId) ?? 0) + weight);
  }
  const classId = [...perClass].sort((x, y) => y[1] - x[1] || (x[0] < y[0] ? -1 : 1))[0]![0];
  return {
    members,
    medoid: members[best]!,
    meanPairIou: pairCount > 0 ? total / pairCount : NaN,
    weight: [...perVoter.values()].reduce((sum, weight) => sum + weight, 0),
    voters: perVoter.size,
    classId,
    spans: image.items[members[best]!]!.spans,
  };
}

function explainItem(
  image: PreparedImage,
  drafts: readonly Draft[],
  dissolved: ReadonlySet<number>,
  own: number,
  item: number,
  iouCut: number,
): { reason: "part-of" | "duplicate" | "covers-several"; of: number[] } | undefined {
  const { spans, annotator, instance } = image.items[item]!;
  if (instance.crowd) return undefined;
  const covered: { c: number; common: number }[] = [];
  let whole = -1;
  let wholeShare = PART_INSIDE_MIN;
  for (let c = 0; c < drafts.length; c++) {
    const other = drafts[c]!;
    if (c === own || dissolved.has(c) || !boxesMeet(spans.box, other.spans.box)) continue;
    const heavier = outweighs(other, drafts[own]!);
    // Two people who draw the same two objects independently have seen a border; one who unites them overlooked it.
    const borne = heavier || (other.voters >= 2 && other.weight * COVERER_WEIGHT_MAX >= drafts[own]!.weight);
    if (!borne) continue;
    const mine = other.members.find((member) => image.items[member]!.annotator === annotator);
    const mySpans = mine === undefined ? undefined : image.items[mine]!.spans;
    if (
      heavier &&
      mySpans &&
      drawnIou(spans, mySpans) >= 0.5 &&
      drawnIou(spans, other.spans) >= Math.max(0.5, iouCut)
    ) {
      return { reason: "duplicate", of: [c] };
    }
    // A cap on a bottle is an object of its own; only the same class is divided or united.
    if (other.classId !== instance.classId || image.items[other.medoid]!.instance.crowd) continue;
    const { commonPx2, aPx2, bPx2 } = overlapOf(spans, other.spans);
    if (commonPx2 >= COVERED_MIN * bPx2) covered.push({ c, common: commonPx2 / Math.max(aPx2, 1e-12) });
    if (
      heavier &&
      drafts[own]!.voters === 1 &&
      commonPx2 > wholeShare * aPx2 &&
      aPx2 <= PART_SIZE_MAX * bPx2 &&
      isDivided(image, item, other, mySpans)
    ) {
      whole = c;
      wholeShare = commonPx2 / aPx2;
    }
  }
  const filled = covered.reduce((sum, { common }) => sum + common, 0);
  if (covered.length >= 2 && filled >= FILLED_MIN)
    return { reason: "covers-several", of: covered.map(({ c }) => c) };
  if (whole >= 0) return { reason: "part-of", of: [whole] };
  return undefined;
}

/**
 * Whether the annotator drew the object in pieces, of which this is one: the pieces lie beside each other and together
 * make up most of the object, none of them the whole. A second object inside a whole one is no piece.
 */
function isDivided(image: PreparedImage, item: number, whole: Draft, member: Spans | undefined): boolean {
  const { spans, annotator, instance } = image.items[item]!;
  const pieces = image.itemsOf[annotator]!.filter(
    (other) => other !== item && image.items[other]!.instance.classId === instance.classId,
  )
    .map((other) => image.items[other]!.spans)
    .filter((other) => boxesMeet(other.box, whole.spans.box));
  let filled = overlapOf(spans, whole.spans).commonPx2;
  const wholePx2 = whole.spans.areaPx2;
  for (const piece of pieces) {
    const { commonPx2, aPx2 } = overlapOf(piece, whole.spans);
    if (piece !== member && commonPx2 < PART_INSIDE_MIN * aPx2) continue;
    if (aPx2 > PART_SIZE_MAX * wholePx2) return false;
    if (overlapOf(piece, spans).commonPx2 > PIECES_SHARE_MAX * Math.min(aPx2, spans.areaPx2)) return false;
    filled += commonPx2;
  }
  return filled >= PIECES_FILL_MIN * wholePx2;
}

/** Pieces of one object overlap each other by no more than this share of the smaller. */
const PIECES_SHARE_MAX = 0.3;
/** Pieces make up at least this share of the object. */
const PIECES_FILL_MIN = 0.6;
