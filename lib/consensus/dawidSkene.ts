import { invariant } from "@/lib/errors";

/**
 * One item's votes: `annotators[i]` said `classes[i]`. An annotator may vote more than once on an item.
 * `truth` pins an item whose class is known from elsewhere (gold).
 */
export type Votes = { annotators: ArrayLike<number>; classes: ArrayLike<number>; truth?: number };

export type DawidSkeneOptions = {
  /** Pseudo-counts added to every row of every annotator's table: `prior[true][said]`. None by default. */
  smoothing?: readonly (readonly number[])[];
  /** Pseudo-count added to each class when the shares are taken. */
  classSmoothing?: number;
  /** Shares used in place of estimated ones. */
  iterationsMax?: number;
  /** Largest move of any posterior at which the EM stops. */
  toleranceMax?: number;
};

export type DawidSkeneResult = {
  /** P(class) of each item, `items x classes`. */
  posterior: Float64Array;
  /** Share of each class. */
  marginals: Float64Array;
  /** P(said | true), `annotators x classes x classes`. */
  errorRates: Float64Array;
  logLikelihood: number;
  iterations: number;
  converged: boolean;
};

/**
 * Maximum likelihood (with pseudo-counts: maximum a posteriori) estimate of the true classes and of every
 * annotator's error rates, by EM from the shares of the votes. Convergence: no posterior moved by more than
 * `toleranceMax` (1e-9). O(iterations x votes x classes). Source: A. P. Dawid and A. M. Skene, Applied
 * Statistics 28(1), 1979, equations 2.3 to 2.5, start by 3.1.
 */
export function dawidSkene(
  items: readonly Votes[],
  annotatorCount: number,
  classCount: number,
  options: DawidSkeneOptions = {},
): DawidSkeneResult {
  const { smoothing, classSmoothing = 0, iterationsMax = 5000, toleranceMax = 1e-9 } = options;
  invariant(classCount > 0, "there is at least one class");
  const posterior = new Float64Array(items.length * classCount);
  items.forEach((item, i) => {
    if (item.truth !== undefined) posterior[i * classCount + item.truth] = 1;
    else {
      const votes = item.classes.length;
      for (let v = 0; v < votes; v++) posterior[i * classCount + item.classes[v]!]! += 1 / votes;
      if (votes === 0) posterior.fill(1 / classCount, i * classCount, (i + 1) * classCount);
    }
  });
  const marginals = new Float64Array(classCount);
  const errorRates = new Float64Array(annotatorCount * classCount * classCount);
  const logRates = new Float64Array(errorRates.length);
  const logShare = new Float64Array(classCount);
  const scores = new Float64Array(classCount);
  let iterations = 0;
  let logLikelihood = -Infinity;
  let moved = Infinity;
  while (iterations < iterationsMax && moved > toleranceMax) {
    iterations++;
    maximise(items, posterior, classCount, marginals, errorRates, smoothing, classSmoothing);
    for (let k = 0; k < errorRates.length; k++) logRates[k] = Math.log(errorRates[k]!);
    for (let c = 0; c < classCount; c++) logShare[c] = Math.log(marginals[c]!);
    moved = 0;
    logLikelihood = 0;
    for (let i = 0; i < items.length; i++) {
      const item = items[i]!;
      if (item.truth !== undefined) continue;
      let best = -Infinity;
      for (let c = 0; c < classCount; c++) {
        let score = logShare[c]!;
        for (let v = 0; v < item.classes.length; v++) {
          score += logRates[(item.annotators[v]! * classCount + c) * classCount + item.classes[v]!]!;
        }
        scores[c] = score;
        if (score > best) best = score;
      }
      let sum = 0;
      for (let c = 0; c < classCount; c++) sum += scores[c] = Math.exp(scores[c]! - best);
      logLikelihood += best + Math.log(sum);
      for (let c = 0; c < classCount; c++) {
        const p = scores[c]! / sum;
        moved = Math.max(moved, Math.abs(p - posterior[i * classCount + c]!));
        posterior[i * classCount + c] = p;
      }
    }
  }
  maximise(items, posterior, classCount, marginals, errorRates, smoothing, classSmoothing);
  return { posterior, marginals, errorRates, logLikelihood, iterations, converged: moved <= toleranceMax };
}

function maximise(
  items: readonly Votes[],
  posterior: Float64Array,
  classCount: number,
  marginals: Float64Array,
  errorRates: Float64Array,
  smoothing: readonly (readonly number[])[] | undefined,
  classSmoothing: number,
): void {
  const square = classCount * classCount;
  for (let k = 0; k < errorRates.length; k++) {
    const cell = k % square;
    errorRates[k] = smoothing ? smoothing[Math.floor(cell / classCount)]![cell % classCount]! : 0;
  }
  marginals.fill(classSmoothing);
  for (let i = 0; i < items.length; i++) {
    const item = items[i]!;
    for (let c = 0; c < classCount; c++) {
      const p = posterior[i * classCount + c]!;
      if (p === 0) continue;
      marginals[c]! += p;
      for (let v = 0; v < item.classes.length; v++) {
        errorRates[(item.annotators[v]! * classCount + c) * classCount + item.classes[v]!]! += p;
      }
    }
  }
  const total = items.length + classSmoothing * classCount;
  for (let c = 0; c < classCount; c++) marginals[c]! /= total;
  for (let row = 0; row < errorRates.length; row += classCount) {
    let sum = 0;
    for (let c = 0; c < classCount; c++) sum += errorRates[row + c]!;
    // An annotator who never met a class has no row for it: every answer is then as likely as any other.
    for (let c = 0; c < classCount; c++)
      errorRates[row + c] = sum > 0 ? errorRates[row + c]! / sum : 1 / classCount;
  }
}
