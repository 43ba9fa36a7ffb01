import { seeded } from "@/lib/vision/ranker";

/** Feature rows and what they are: +1 or -1, with a cost factor each. */
export type LinearExamples = { rows: readonly Float32Array[]; labels: Int8Array; costs: Float32Array };

/** Mean and spread of each feature. */
export type Scaling = { mean: Float64Array; inverse: Float64Array };

export function scalingOf(rows: readonly Float32Array[]): Scaling {
  const width = rows[0]?.length ?? 0;
  const mean = new Float64Array(width);
  const inverse = new Float64Array(width);
  for (const row of rows) for (let f = 0; f < width; f++) mean[f]! += row[f]! / rows.length;
  for (const row of rows)
    for (let f = 0; f < width; f++) inverse[f]! += (row[f]! - mean[f]!) ** 2 / rows.length;
  for (let f = 0; f < width; f++) inverse[f] = 1 / (Math.sqrt(inverse[f]!) + 0.02);
  return { mean, inverse };
}

/**
 * Linear support vector machine with squared hinge loss by dual coordinate descent (Hsieh et al., ICML 2008) on scaled
 * features. Returns weights for raw features, the constant last. Deterministic. O(rounds x rows x features).
 */
export function fitLinear(
  { rows, labels, costs }: LinearExamples,
  { mean, inverse }: Scaling,
  cost: number,
  rounds = 25,
): Float64Array {
  const width = mean.length;
  const n = rows.length;
  const scaled = new Float32Array(n * width);
  const norms = new Float64Array(n);
  for (let r = 0; r < n; r++) {
    let norm = 1;
    for (let f = 0; f < width; f++) {
      const value = Math.max(-4, Math.min(4, (rows[r]![f]! - mean[f]!) * inverse[f]!));
      scaled[r * width + f] = value;
      norm += value * value;
    }
    norms[r] = norm;
  }
  const weights = new Float64Array(width + 1);
  const alpha = new Float64Array(n);
  const order = Int32Array.from({ length: n }, (_, r) => r);
  const random = seeded(11);
  for (let round = 0; round < rounds; round++) {
    for (let r = n - 1; r > 0; r--) {
      const other = Math.floor(random() * (r + 1));
      const kept = order[r]!;
      order[r] = order[other]!;
      order[other] = kept;
    }
    let most = 0;
    for (let at = 0; at < n; at++) {
      const r = order[at]!;
      const y = labels[r]!;
      const from = r * width;
      let sum = weights[width]!;
      for (let f = 0; f < width; f++) sum += weights[f]! * scaled[from + f]!;
      const diagonal = 1 / (2 * cost * costs[r]!);
      const gradient = y * sum - 1 + diagonal * alpha[r]!;
      if (alpha[r] === 0 && gradient >= 0) continue;
      const before = alpha[r]!;
      alpha[r] = Math.max(0, before - gradient / (norms[r]! + diagonal));
      const change = (alpha[r]! - before) * y;
      if (change === 0) continue;
      most = Math.max(most, Math.abs(gradient));
      for (let f = 0; f < width; f++) weights[f]! += change * scaled[from + f]!;
      weights[width]! += change;
    }
    if (most < 0.02) break;
  }
  return unscaled(weights, { mean, inverse });
}

/**
 * Ridge regression of several targets, solved in the dual: O(rows² x features + rows³). Returns weights for raw features, the
 * constant last, one array a target.
 */
export function fitRidge(
  rows: readonly Float32Array[],
  targets: readonly Float64Array[],
  { mean, inverse }: Scaling,
  ridge: number,
): Float64Array[] {
  const width = mean.length;
  const n = rows.length;
  const scaled = rows.map((row) =>
    Float64Array.from(row, (value, f) => Math.max(-4, Math.min(4, (value - mean[f]!) * inverse[f]!))),
  );
  const low: Float64Array[] = [];
  for (let i = 0; i < n; i++) {
    const row = new Float64Array(i + 1);
    for (let j = 0; j <= i; j++) {
      let sum = i === j ? ridge : 0;
      const a = scaled[i]!;
      const b = scaled[j]!;
      for (let f = 0; f < width; f++) sum += a[f]! * b[f]!;
      row[j] = sum;
    }
    low.push(row);
  }
  for (let i = 0; i < n; i++) {
    const own = low[i]!;
    for (let j = 0; j <= i; j++) {
      const other = low[j]!;
      let sum = own[j]!;
      for (let k = 0; k < j; k++) sum -= own[k]! * other[k]!;
      own[j] = i === j ? Math.sqrt(Math.max(sum, 1e-9)) : sum / other[j]!;
    }
  }
  return targets.map((target) => {
    let average = 0;
    for (let i = 0; i < n; i++) average += target[i]! / n;
    const dual = Float64Array.from(target, (value) => value - average);
    for (let i = 0; i < n; i++) {
      for (let k = 0; k < i; k++) dual[i]! -= low[i]![k]! * dual[k]!;
      dual[i]! /= low[i]![i]!;
    }
    for (let i = n - 1; i >= 0; i--) {
      for (let k = i + 1; k < n; k++) dual[i]! -= low[k]![i]! * dual[k]!;
      dual[i]! /= low[i]![i]!;
    }
    const weights = new Float64Array(width + 1);
    for (let i = 0; i < n; i++) for (let f = 0; f < width; f++) weights[f]! += dual[i]! * scaled[i]![f]!;
    weights[width] = average;
    return unscaled(weights, { mean, inverse });
  });
}

function unscaled(weights: Float64Array, { mean, inverse }: Scaling): Float64Array {
  const out = Float64Array.from(weights);
  const last = weights.length - 1;
  for (let f = 0; f < last; f++) {
    out[f] = weights[f]! * inverse[f]!;
    out[last]! -= out[f]! * mean[f]!;
  }
  return out;
}
