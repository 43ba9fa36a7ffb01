/** Examples for a logistic model: rows of the same length, the first value 1; labels 0 or 1. */
export type Example = { features: readonly number[]; positive: boolean; weight: number };

/**
 * Weights of a logistic model with ridge penalty, by iteratively reweighted least squares (Newton). The
 * constant is not penalised. Deterministic. O(rounds x (n d² + d³)).
 */
export function fitLogistic(examples: readonly Example[], ridge: number, rounds = 12): number[] {
  const d = examples[0]?.features.length ?? 0;
  let weights = new Array<number>(d).fill(0);
  for (let round = 0; round < rounds; round++) {
    const hessian = Array.from({ length: d }, () => new Float64Array(d));
    const gradient = new Float64Array(d);
    for (const { features, positive, weight } of examples) {
      let sum = 0;
      for (let i = 0; i < d; i++) sum += features[i]! * weights[i]!;
      const p = 1 / (1 + Math.exp(-sum));
      const g = weight * ((positive ? 1 : 0) - p);
      const s = weight * Math.max(1e-6, p * (1 - p));
      for (let i = 0; i < d; i++) {
        const value = features[i]!;
        gradient[i]! += g * value;
        const row = hessian[i]!;
        for (let j = 0; j <= i; j++) row[j]! += s * value * features[j]!;
      }
    }
    for (let i = 0; i < d; i++) {
      const penalty = i === 0 ? 1e-6 : ridge;
      hessian[i]![i]! += penalty;
      gradient[i]! -= penalty * weights[i]!;
    }
    const change = solve(hessian, gradient);
    weights = weights.map((value, i) => value + change[i]!);
    if (Math.max(...change.map(Math.abs)) < 1e-7) break;
  }
  return weights;
}

/** Solves a symmetric positive definite system by Cholesky; reads the lower triangle. */
function solve(matrix: Float64Array[], right: Float64Array): number[] {
  const n = right.length;
  const low = matrix.map((row) => Float64Array.from(row));
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = low[i]![j]!;
      for (let k = 0; k < j; k++) sum -= low[i]![k]! * low[j]![k]!;
      low[i]![j] = i === j ? Math.sqrt(Math.max(sum, 1e-12)) : sum / low[j]![j]!;
    }
  }
  const y = new Float64Array(n);
  for (let i = 0; i < n; i++) {
    let sum = right[i]!;
    for (let k = 0; k < i; k++) sum -= low[i]![k]! * y[k]!;
    y[i] = sum / low[i]![i]!;
  }
  const x = new Array<number>(n).fill(0);
  for (let i = n - 1; i >= 0; i--) {
    let sum = y[i]!;
    for (let k = i + 1; k < n; k++) sum -= low[k]![i]! * x[k]!;
    x[i] = sum / low[i]![i]!;
  }
  return x;
}
