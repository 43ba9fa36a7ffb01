export type StapleResult = {
  /** P(pixel belongs to the object), one per pixel; 0..1. */
  probability: Float64Array;
  sensitivity: Float64Array;
  specificity: Float64Array;
  iterations: number;
};

/**
 * STAPLE: the hidden true mask and every rater's sensitivity and specificity, by EM, with a global prior
 * and no spatial one. `decisions[rater][pixel]` is 0 or 1. Stops when no parameter moves by more than
 * `toleranceMax`, or after `iterationsMax`. O(iterations x distinct decision columns), because pixels on
 * which all raters decided alike share one posterior. Source: Warfield, Zou and Wells, IEEE TMI 23(7), 2004.
 */
export function staple(
  decisions: readonly Uint8Array[],
  {
    prior,
    iterationsMax = 2000,
    toleranceMax = 1e-12,
  }: { prior?: number; iterationsMax?: number; toleranceMax?: number } = {},
): StapleResult {
  const raters = decisions.length;
  const pixels = decisions[0]?.length ?? 0;
  const patternOf = new Map<string, number>();
  const patterns: Uint8Array[] = [];
  const counts: number[] = [];
  const patternAt = new Int32Array(pixels);
  for (let pixel = 0; pixel < pixels; pixel++) {
    let key = "";
    for (const mask of decisions) key += mask[pixel] ? "1" : "0";
    let index = patternOf.get(key);
    if (index === undefined) {
      index = patterns.length;
      patternOf.set(key, index);
      patterns.push(Uint8Array.from(decisions, (mask) => (mask[pixel] ? 1 : 0)));
      counts.push(0);
    }
    counts[index]! += 1;
    patternAt[pixel] = index;
  }
  let positives = 0;
  patterns.forEach(
    (pattern, index) => (positives += counts[index]! * pattern.reduce((sum, bit) => sum + bit, 0)),
  );
  const share = prior ?? positives / Math.max(1, raters * pixels);
  const sensitivity = new Float64Array(raters).fill(0.99999);
  const specificity = new Float64Array(raters).fill(0.99999);
  const posterior = new Float64Array(patterns.length);
  let iterations = 0;
  for (; iterations < iterationsMax; iterations++) {
    updatePosterior(patterns, share, sensitivity, specificity, posterior);
    let inside = 0;
    let outside = 0;
    const hits = new Float64Array(raters);
    const rejections = new Float64Array(raters);
    for (let i = 0; i < patterns.length; i++) {
      const w = posterior[i]! * counts[i]!;
      const v = counts[i]! - w;
      inside += w;
      outside += v;
      for (let r = 0; r < raters; r++) {
        if (patterns[i]![r]) hits[r]! += w;
        else rejections[r]! += v;
      }
    }
    let moved = 0;
    for (let r = 0; r < raters; r++) {
      const p = inside > 0 ? hits[r]! / inside : 1;
      const q = outside > 0 ? rejections[r]! / outside : 1;
      moved = Math.max(moved, Math.abs(p - sensitivity[r]!), Math.abs(q - specificity[r]!));
      sensitivity[r] = p;
      specificity[r] = q;
    }
    if (moved <= toleranceMax) break;
  }
  updatePosterior(patterns, share, sensitivity, specificity, posterior);
  const probability = new Float64Array(pixels);
  for (let pixel = 0; pixel < pixels; pixel++) probability[pixel] = posterior[patternAt[pixel]!]!;
  return { probability, sensitivity, specificity, iterations };
}

function updatePosterior(
  patterns: readonly Uint8Array[],
  prior: number,
  sensitivity: Float64Array,
  specificity: Float64Array,
  posterior: Float64Array,
): void {
  for (let i = 0; i < patterns.length; i++) {
    let inside = prior;
    let outside = 1 - prior;
    const pattern = patterns[i]!;
    for (let r = 0; r < pattern.length; r++) {
      inside *= pattern[r] ? sensitivity[r]! : 1 - sensitivity[r]!;
      outside *= pattern[r] ? 1 - specificity[r]! : specificity[r]!;
    }
    posterior[i] = inside + outside > 0 ? inside / (inside + outside) : 0;
  }
}
