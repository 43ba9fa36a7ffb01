import type { CopyGroup } from "./types";

/** Sums over a batch, by index of the annotator; pair (a, b) is at a * count + b, both ways. */
export type TwinCounts = {
  readonly count: number;
  /** Pairs of instances with an IoU near 1. */
  readonly close: Float64Array;
  /** Pairs of instances with an IoU of at least one half. */
  readonly matched: Float64Array;
  readonly drawn: Float64Array;
  readonly taken: Float64Array;
  readonly images: Float64Array;
  /** Drawings that somebody else's all but equals. */
  readonly twinned: Float64Array;
  /** Other people met, summed over images. */
  readonly others: Float64Array;
};

/** Matched pairs before two people can be called copies. */
const MATCHED_MIN = 8;
/** Share of them that is near 1; between honest careful people it stays below a tenth (simulated pools). */
const CLOSE_SHARE_MIN = 0.6;
/** Share of a person's drawings with a near twin by somebody, from which the person copies whoever is there. */
const TWIN_SHARE_MIN = 0.6;
/** A share must be this many times what chance gives in the batch: plain objects are drawn alike by honest people. */
const CHANCE_FACTOR = 3;
/** Share of a person's instances that are untouched proposals, from which the proposals are what votes. */
const TAKEN_SHARE_MIN = 0.97;
const TAKEN_MIN = 20;

export type Copies = {
  copies: CopyGroup[];
  /** Per annotator: whom they copy, or null. */
  copyOf: (string | null)[];
  /** Whether two annotators share one vote in every image that both labelled. */
  closeOf: (a: number, b: number) => boolean;
};

/**
 * Finds people who hand in the same drawings again and again, and people who hand in the proposals untouched.
 * Independent outlines of one object practically never coincide, so a large share of near-identical ones
 * is evidence whatever the objects are. Of two who share, the one with more twins overall is the copier.
 */
export function findCopies(ids: readonly string[], twins: TwinCounts): Copies {
  const { count, close, matched, drawn, taken, images } = twins;
  const copyOf: (string | null)[] = ids.map(() => null);
  const together = new Set<number>();
  const copies: CopyGroup[] = [];
  const chance = chanceOfTwins(twins);
  const twinShare = ids.map((_, a) => twins.twinned[a]! / Math.max(1, drawn[a]!));
  const untouched = ids.filter(
    (_, a) => drawn[a]! >= TAKEN_MIN && images[a]! >= 3 && taken[a]! >= TAKEN_SHARE_MIN * drawn[a]!,
  );
  if (untouched.length > 0) {
    const indices = untouched.map((id) => ids.indexOf(id));
    for (const a of indices) {
      copyOf[a] = "proposals";
      for (const b of indices) if (a !== b) together.add(a * count + b);
    }
    const share = indices.reduce((sum, a) => sum + taken[a]! / drawn[a]!, 0) / indices.length;
    copies.push({ annotatorIds: untouched, source: "proposals", share });
  }
  for (let a = 0; a < count; a++) {
    for (let b = a + 1; b < count; b++) {
      const pair = a * count + b;
      if (matched[pair]! < MATCHED_MIN || close[pair]! < needed(CLOSE_SHARE_MIN, chance) * matched[pair]!)
        continue;
      together.add(pair).add(b * count + a);
      const share = close[pair]! / matched[pair]!;
      copies.push({ annotatorIds: [ids[a]!, ids[b]!], source: "annotator", share });
      if (twinShare[a]! >= twinShare[b]!) copyOf[a] ??= ids[b]!;
      if (twinShare[b]! >= twinShare[a]!) copyOf[b] ??= ids[a]!;
    }
  }
  ids.forEach((_, a) => {
    const byChance = 1 - (1 - chance) ** (twins.others[a]! / Math.max(1, images[a]!));
    if (copyOf[a] || drawn[a]! < MATCHED_MIN || twinShare[a]! < needed(TWIN_SHARE_MIN, byChance)) return;
    let source = -1;
    for (let b = 0; b < count; b++) {
      if (b !== a && close[a * count + b]! > (source < 0 ? 0 : close[a * count + source]!)) source = b;
    }
    if (source >= 0) copyOf[a] = ids[source]!;
  });
  return { copies, copyOf, closeOf: (a, b) => together.has(a * count + b) };
}

/** The share that convicts: at least `least`, and clearly above chance; never reached where chance is high. */
function needed(least: number, chance: number): number {
  return Math.max(least, CHANCE_FACTOR * chance);
}

/** Median over pairs of people of the share of their matched drawings that are near twins. */
function chanceOfTwins({ count, close, matched }: TwinCounts): number {
  const shares: number[] = [];
  for (let a = 0; a < count; a++) {
    for (let b = a + 1; b < count; b++) {
      if (matched[a * count + b]! >= 3) shares.push(close[a * count + b]! / matched[a * count + b]!);
    }
  }
  shares.sort((x, y) => x - y);
  return shares[(shares.length - 1) >> 1] ?? 0;
}
