/** Learned scores of feature vectors: a committee of small networks with one hidden layer. Plain data: it survives JSON. */
export type Ranker = {
  /** Each feature less its mean, over its spread, cut at ±3. */
  mean: number[];
  spread: number[];
  hidden: number;
  /** Per network: hidden x (features + 1) weights, then hidden + 1 of the output. */
  networks: number[][];
};

export type RankerExamples = {
  /** rows x width, row by row. */
  features: Float32Array;
  /** What the score should be, 0..1. */
  target: Float32Array;
  weight: Float32Array;
};

const CUT = 3;

/** Scores of rows, log odds; O(rows x features x hidden x networks). */
export function rank(model: Ranker, features: Float32Array): Float64Array {
  const width = model.mean.length;
  const rows = features.length / width;
  const scores = new Float64Array(rows);
  const { hidden } = model;
  const networks = model.networks.map((weights) => Float64Array.from(weights));
  const row = new Float64Array(width);
  for (let r = 0; r < rows; r++) {
    for (let f = 0; f < width; f++) {
      const value = (features[r * width + f]! - model.mean[f]!) / model.spread[f]!;
      row[f] = value > CUT ? CUT : value < -CUT ? -CUT : value;
    }
    let sum = 0;
    for (const weights of networks) {
      const out = hidden * (width + 1);
      sum += weights[out + hidden]!;
      for (let h = 0; h < hidden; h++) {
        let z = weights[h * (width + 1) + width]!;
        for (let f = 0; f < width; f++) z += weights[h * (width + 1) + f]! * row[f]!;
        sum += weights[out + h]! * (z > 0 ? z : 0.05 * z);
      }
    }
    scores[r] = sum / networks.length;
  }
  return scores;
}

/** A generator of numbers in [0, 1) that is the same everywhere (mulberry32; common practice). */
export function seeded(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = Math.imul(state ^ (state >>> 15), 1 | state);
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t;
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
  };
}

/**
 * Fits a ranker by Adam (Kingma and Ba, 2015) on weighted cross-entropy with weight decay. Deterministic for a seed.
 * O(epochs x rows x features x hidden x networks).
 */
export function fitRanker(
  { features, target, weight }: RankerExamples,
  width: number,
  { hidden = 16, networks = 3, epochs = 12, rate = 0.004, decay = 0.002, seed = 1 } = {},
): Ranker {
  const rows = target.length;
  const mean = new Array<number>(width).fill(0);
  const spread = new Array<number>(width).fill(0);
  for (let r = 0; r < rows; r++) for (let f = 0; f < width; f++) mean[f]! += features[r * width + f]! / rows;
  for (let r = 0; r < rows; r++)
    for (let f = 0; f < width; f++) spread[f]! += (features[r * width + f]! - mean[f]!) ** 2 / rows;
  for (let f = 0; f < width; f++) spread[f] = Math.sqrt(spread[f]!) + 1e-3;
  const rowsIn = new Float32Array(features.length);
  for (let r = 0; r < rows; r++) {
    for (let f = 0; f < width; f++) {
      rowsIn[r * width + f] = Math.max(
        -CUT,
        Math.min(CUT, (features[r * width + f]! - mean[f]!) / spread[f]!),
      );
    }
  }
  const model: Ranker = { mean, spread, hidden, networks: [] };
  for (let network = 0; network < networks; network++) {
    model.networks.push([
      ...fitNetwork(rowsIn, target, weight, width, hidden, epochs, rate, decay, seeded(seed * 100 + network)),
    ]);
  }
  return model;
}

const BATCH = 64;

function fitNetwork(
  rowsIn: Float32Array,
  target: Float32Array,
  weight: Float32Array,
  width: number,
  hidden: number,
  epochs: number,
  rate: number,
  decay: number,
  random: () => number,
): Float64Array {
  const rows = target.length;
  const out = hidden * (width + 1);
  const size = out + hidden + 1;
  const weights = new Float64Array(size);
  for (let n = 0; n < out; n++) weights[n] = (random() - 0.5) * 2 * Math.sqrt(3 / width);
  for (let n = out; n < size - 1; n++) weights[n] = (random() - 0.5) * 2 * Math.sqrt(3 / hidden) * 0.3;
  let weightSum = 0;
  for (let r = 0; r < rows; r++) weightSum += weight[r]!;
  const scale = rows / weightSum;
  const gradient = new Float64Array(size);
  const first = new Float64Array(size);
  const second = new Float64Array(size);
  const z = new Float64Array(hidden);
  const order = Int32Array.from({ length: rows }, (_, r) => r);
  const steps = epochs * Math.ceil(rows / BATCH);
  let step = 0;
  for (let epoch = 0; epoch < epochs; epoch++) {
    for (let r = rows - 1; r > 0; r--) {
      const other = Math.floor(random() * (r + 1));
      const kept = order[r]!;
      order[r] = order[other]!;
      order[other] = kept;
    }
    for (let start = 0; start < rows; start += BATCH) {
      const end = Math.min(rows, start + BATCH);
      gradient.fill(0);
      for (let n = start; n < end; n++) {
        const r = order[n]!;
        const from = r * width;
        let sum = weights[size - 1]!;
        for (let h = 0; h < hidden; h++) {
          const at = h * (width + 1);
          let value = weights[at + width]!;
          for (let f = 0; f < width; f++) value += weights[at + f]! * rowsIn[from + f]!;
          z[h] = value;
          sum += weights[out + h]! * (value > 0 ? value : 0.05 * value);
        }
        const error = (1 / (1 + Math.exp(-sum)) - target[r]!) * weight[r]! * scale;
        gradient[size - 1]! += error;
        for (let h = 0; h < hidden; h++) {
          const value = z[h]!;
          gradient[out + h]! += error * (value > 0 ? value : 0.05 * value);
          const back = error * weights[out + h]! * (value > 0 ? 1 : 0.05);
          const at = h * (width + 1);
          for (let f = 0; f < width; f++) gradient[at + f]! += back * rowsIn[from + f]!;
          gradient[at + width]! += back;
        }
      }
      step++;
      const pace =
        (rate * Math.max(0.02, 1 - step / steps) * Math.sqrt(1 - 0.999 ** step)) / (1 - 0.9 ** step);
      for (let n = 0; n < size; n++) {
        const g = gradient[n]! / (end - start);
        first[n] = 0.9 * first[n]! + 0.1 * g;
        second[n] = 0.999 * second[n]! + 0.001 * g * g;
        weights[n]! -= (pace * first[n]!) / (Math.sqrt(second[n]!) + 1e-8) + rate * decay * weights[n]!;
      }
    }
  }
  return weights;
}
