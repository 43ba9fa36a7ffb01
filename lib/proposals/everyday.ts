import type { io, Tensor } from "@tensorflow/tfjs-core";
import type { Box } from "@/lib/geometry/types";
import { cutRaster, type Raster } from "@/lib/vision/raster";
import { EVERYDAY_LABELS, type EverydayLabel } from "./everydayLabels";
import { suppress } from "./suppress";

/** A hit of the detector of everyday things, px of the raster. */
export type EverydayHit = { box: Box; label: EverydayLabel; score: number };

export type EverydayDetector = {
  /**
   * Hits of the labels asked for (all where absent), best first, one a thing: of the whole picture, and of its two overlapping
   * halves along the longer side, where small things are larger. Synchronous.
   */
  find: (raster: Raster, labels?: ReadonlySet<EverydayLabel>) => EverydayHit[];
};

/** Side of the network's input, px; fixed in the weights. */
const SIDE_PX = 416;
/** Mean and spread of blue, green and red in training (ImageNet's, as the network's authors state them). */
const MEAN = [103.53, 116.28, 123.675] as const;
const SPREAD = [57.375, 57.12, 58.395] as const;
const STRIDES = [8, 16, 32] as const;
/** Outputs of the graph for each stride: scores of the labels, and the four distances as distributions. */
const OUTPUTS = [
  ["Identity:0", "Identity_3:0"],
  ["Identity_1:0", "Identity_4:0"],
  ["Identity_2:0", "Identity_5:0"],
] as const;
const BINS = 11;
const LABELS = EVERYDAY_LABELS.length;
/** Weaker hits are noise; at most so many go on to suppression. */
const SCORE_MIN = 0.05;
const HITS_MAX = 600;
/** Two hits that overlap by more are one thing, whatever their labels: a thing has one class. */
const SAME_IOU = 0.55;
/** Length of a half, as a share of the picture's longer side, so that the halves overlap. */
const HALF_SHARE = 0.6;
/** What touches the cut of a half by less than this is seen whole in the other half or in the picture. */
const CUT_PX = 3;
/** What fills more of a half is seen better in the whole picture. */
const HALF_FILLED_MAX = 0.25;
/** Below, both halves would be no closer look. */
const HALVED_FROM_PX = 300;

/** Platt's line (1999) over the log odds of a hit's score; printed by `npm run bench:proposals`. */
const KEPT = { slope: 2.84, offset: 0.6 };

/** Probability that a person keeps a hit with this score. */
export function everydayProbability(score: number, { slope, offset } = KEPT): number {
  return 1 / (1 + Math.exp(-(slope * Math.log(score / (1 - score)) + offset)));
}

/**
 * Makes the detector from its graph and weights: NanoDet (RangiLyu, 2020; Apache License 2.0), a one-stage detector with
 * distributions over box sides (Li et al., Generalized Focal Loss, 2020). Runs in WebAssembly on one core, without network;
 * the same in Node and in a worker of the browser. The picture is stretched to the input's square. TensorFlow.js is loaded
 * by the first call only: who never asks for the detector does not wait for it.
 */
export async function openEverydayDetector(graph: object, weights: ArrayBuffer): Promise<EverydayDetector> {
  const [tf, { loadGraphModel }, { setThreadsCount }] = await Promise.all([
    import("@tensorflow/tfjs-core"),
    import("@tensorflow/tfjs-converter"),
    import("@tensorflow/tfjs-backend-wasm"),
  ]);
  setThreadsCount(1);
  await tf.setBackend("wasm");
  await tf.ready();
  const { modelTopology, weightsManifest } = graph as {
    modelTopology: object;
    weightsManifest: { weights: io.WeightsManifestEntry[] }[];
  };
  const model = await loadGraphModel(
    tf.io.fromMemory({
      modelTopology,
      weightSpecs: weightsManifest.flatMap((group) => group.weights),
      weightData: weights,
    }),
  );
  const network: Network = (values) => {
    const outputs: Float32Array[] = [];
    tf.tidy(() => {
      const input = tf.tensor(values, [1, 3, SIDE_PX, SIDE_PX]);
      // Kept outside: what tidy returns is searched for tensors number by number, which takes longer than the network.
      for (const tensor of model.execute(input, OUTPUTS.flat()) as Tensor[])
        outputs.push(tensor.dataSync() as Float32Array);
    });
    return outputs;
  };
  return { find: (raster, labels) => findInAll(network, raster, labels) };
}

function findInAll(network: Network, raster: Raster, labels?: ReadonlySet<EverydayLabel>): EverydayHit[] {
  const found = findIn(network, raster, labels);
  const isWide = raster.width >= raster.height;
  const long = Math.max(raster.width, raster.height);
  const half = Math.round(long * HALF_SHARE);
  for (const start of long >= HALVED_FROM_PX ? [0, long - half] : []) {
    const part = isWide
      ? cutRaster(raster, start, 0, half, raster.height)
      : cutRaster(raster, 0, start, raster.width, half);
    for (const { box, label, score } of findIn(network, part, labels)) {
      const [x, y, w, h] = box;
      const [near, far] = isWide ? [x, x + w] : [y, y + h];
      const isCut = start === 0 ? far > half - CUT_PX : near < CUT_PX;
      if (isCut || w * h > HALF_FILLED_MAX * part.width * part.height) continue;
      found.push({ box: isWide ? [x + start, y, w, h] : [x, y + start, w, h], label, score });
    }
  }
  return suppress(
    found.map(({ box }) => box),
    found.map(({ score }) => score),
    SAME_IOU,
  ).map((index) => found[index]!);
}

/** The planes of one picture in, the graph's OUTPUTS out. */
type Network = (input: Float32Array) => Float32Array[];

/** Hits of one look, several a thing. */
function findIn(network: Network, raster: Raster, labels?: ReadonlySet<EverydayLabel>): EverydayHit[] {
  const outputs = network(inputOf(raster));
  const hits: { box: Box; label: number; score: number }[] = [];
  STRIDES.forEach((stride, level) => {
    const scores = outputs[level * 2]!;
    const sides = outputs[level * 2 + 1]!;
    const cells = Math.ceil(SIDE_PX / stride);
    for (let cell = 0; cell < cells * cells; cell++) {
      for (let label = 0; label < LABELS; label++) {
        const score = scores[cell * LABELS + label]!;
        if (score < SCORE_MIN || (labels && !labels.has(EVERYDAY_LABELS[label]!))) continue;
        const x = ((cell % cells) + 0.5) * stride;
        const y = (Math.floor(cell / cells) + 0.5) * stride;
        const at = cell * 4 * BINS;
        const left = Math.max(0, x - distanceOf(sides, at) * stride);
        const top = Math.max(0, y - distanceOf(sides, at + BINS) * stride);
        const right = Math.min(SIDE_PX, x + distanceOf(sides, at + 2 * BINS) * stride);
        const bottom = Math.min(SIDE_PX, y + distanceOf(sides, at + 3 * BINS) * stride);
        if (right - left < 1 || bottom - top < 1) continue;
        hits.push({ box: [left, top, right - left, bottom - top], label, score });
      }
    }
  });
  hits.sort((a, b) => b.score - a.score);
  hits.length = Math.min(hits.length, HITS_MAX);
  const toX = raster.width / SIDE_PX;
  const toY = raster.height / SIDE_PX;
  return hits.map(({ box: [x, y, w, h], label, score }) => ({
    box: [x * toX, y * toY, w * toX, h * toY],
    label: EVERYDAY_LABELS[label]!,
    score,
  }));
}

/** Expectation of a distance over its bins, in strides. */
function distanceOf(sides: Float32Array, at: number): number {
  let most = -Infinity;
  for (let bin = 0; bin < BINS; bin++) most = Math.max(most, sides[at + bin]!);
  let sum = 0;
  let moment = 0;
  for (let bin = 0; bin < BINS; bin++) {
    const share = Math.exp(sides[at + bin]! - most);
    sum += share;
    moment += share * bin;
  }
  return moment / sum;
}

/** Planes of blue, green and red of the picture stretched to the input's square, each new pixel interpolated between four. */
function inputOf({ width, height, data }: Raster): Float32Array {
  const plane = SIDE_PX * SIDE_PX;
  const input = new Float32Array(3 * plane);
  // Shrinking by more than two takes the mean of as many samples along each side as it skips pixels.
  const samplesX = Math.max(1, Math.min(8, Math.round(width / SIDE_PX)));
  const samplesY = Math.max(1, Math.min(8, Math.round(height / SIDE_PX)));
  const share = 1 / (samplesX * samplesY);
  for (let y = 0; y < SIDE_PX; y++) {
    for (let x = 0; x < SIDE_PX; x++) {
      let [red, green, blue] = [0, 0, 0];
      for (let sy = 0; sy < samplesY; sy++) {
        const py = Math.max(0, Math.min(height - 1, ((y + (sy + 0.5) / samplesY) * height) / SIDE_PX - 0.5));
        const top = Math.floor(py);
        const fy = py - top;
        const below = Math.min(height - 1, top + 1);
        for (let sx = 0; sx < samplesX; sx++) {
          const px = Math.max(0, Math.min(width - 1, ((x + (sx + 0.5) / samplesX) * width) / SIDE_PX - 0.5));
          const left = Math.floor(px);
          const fx = px - left;
          const right = Math.min(width - 1, left + 1);
          const a = (top * width + left) * 3;
          const b = (top * width + right) * 3;
          const c = (below * width + left) * 3;
          const d = (below * width + right) * 3;
          const [wa, wb, wc, wd] = [(1 - fx) * (1 - fy), fx * (1 - fy), (1 - fx) * fy, fx * fy];
          red += wa * data[a]! + wb * data[b]! + wc * data[c]! + wd * data[d]!;
          green += wa * data[a + 1]! + wb * data[b + 1]! + wc * data[c + 1]! + wd * data[d + 1]!;
          blue += wa * data[a + 2]! + wb * data[b + 2]! + wc * data[c + 2]! + wd * data[d + 2]!;
        }
      }
      const at = y * SIDE_PX + x;
      input[at] = (blue * share - MEAN[0]) / SPREAD[0];
      input[plane + at] = (green * share - MEAN[1]) / SPREAD[1];
      input[2 * plane + at] = (red * share - MEAN[2]) / SPREAD[2];
    }
  }
  return input;
}
