import { boxIou } from "@/lib/geometry/box";
import type { Box, Rings } from "@/lib/geometry/types";
import { outlineInBox } from "@/lib/vision/outline";
import { cutRaster, shrinkRaster, type Raster } from "@/lib/vision/raster";
import { seeded } from "@/lib/vision/ranker";
import { averagePrecision, type Found } from "./averagePrecision";
import { BOX_FEATURES, boxFeatures, COLOUR_FEATURES, colourFeatures } from "./boxFeatures";
import { decodeBox, encodeBox } from "./boxCoding";
import { candidates, type CandidateSet } from "./candidates";
import { channelsOf, describeWindow, scanWindows, WINDOW_FEATURES, type Channels } from "./channels";
import { fitLinear, fitRidge, scalingOf } from "./linear";
import { fitLogistic } from "./logistic";
import { rankCandidates } from "./objectness";
import type { Proposal } from "./propose";
import { byScore, suppress } from "./suppress";

/** A settled image: what people agreed on, px of the raster. */
export type ExemplarImage = {
  raster: Raster;
  instances: readonly { classId: string; box: Box; rings?: Rings }[];
};

/** What was learned of one class. Weights are for raw features, the constant last. */
export type ExemplarClass = {
  classId: string;
  /** Objects that taught it. */
  examples: number;
  /** Window sizes as shares of the picture's longer side. */
  sizes: (readonly [width: number, height: number])[];
  /** Mean log width, log height and their spreads, in the same shares. */
  prior: [number, number, number, number];
  /** Linear weights of the windows' cells, for the search. */
  search: number[];
  /** Linear weights of cells, box features and size, for the verdict. */
  verdict: number[];
  /** Weights of the four offsets. */
  offsets: number[][];
  /** Probability = 1 / (1 + exp(-(slope * verdict + offset))). */
  slope: number;
  offset: number;
  /** Average precision at IoU 0.5 on held-out images; null where none could be held out. */
  ap: number | null;
};

/** What a batch's own settled labels taught. Plain data: it survives JSON. */
export type ExemplarModel = {
  version: 2;
  classes: ExemplarClass[];
  /** Mean over classes of average precision at IoU 0.5 on images it was not trained on; null where none could be held out. */
  apWith: number | null;
  /** The same for the class-agnostic ranking, with the class taken as known. */
  apWithout: number | null;
  useful: boolean;
};

export type TrainOptions = { foldsMax?: number; seed?: number };

/** Side at which windows are described. */
const SIDE_PX = 640;
/** One scale of regions is enough beside windows, at a third of the time. */
const REGION_SCALES = [16] as const;
const REGION_SIDE_PX = 560;
const EXTRA = BOX_FEATURES + COLOUR_FEATURES + 5;
const FEATURES = WINDOW_FEATURES + EXTRA;
const SIZES_MAX = 6;
const POSITIVES_MAX = 600;
const RIGHT_IOU = 0.6;
const WRONG_IOU = 0.5;
/** Copies of the objects that are off by too much to count, over all objects. */
const NEAR_MISSES = 600;
/** Moves and sizes of copies that count as the object, and of those that teach the offsets, in box sizes. */
const JITTER = 0.09;
const MOVE = 0.25;
const REGRESSED_MAX = 500;
/** Penalty of the offsets' weights, and how often a box is moved. */
const RIDGE = 400;
const MOVES = 2;
/** A moved box lies better than its verdict, which does not look so closely, can tell. */
const MOVED_BONUS = 0.3;
const NEGATIVES_MAX = 2500;
const ROUNDS = 3;
/** Images searched for false alarms in a round. */
const SCANNED_MAX = 3;
const HARD_A_ROUND = 60;
/** Windows of the search that get a verdict. */
const SEARCHED_MAX = 300;
/** Windows and regions below get no verdict. */
const SEARCH_LEAST = -2.5;
const NMS_IOU = 0.4;
/** It must gain this much average precision on images that it has not seen. */
const GAIN_MIN = 0.03;
/** And be this good in itself: below, most of what it says is wrong. */
const AP_MIN = 0.1;
const EXAMPLES_MIN = 2;
const MIRRORED_MAX = 3;

/** A picture made ready: everything in px of `channels`. */
type Prepared = {
  raster: Raster;
  channels: Channels;
  set: CandidateSet;
  /** From px of the candidates to px of the channels. */
  grow: number;
  toRaster: number;
  regions: Box[];
  truth: { classId: string; box: Box }[];
};

function prepare(raster: Raster, instances: ExemplarImage["instances"]): Prepared {
  const medium = shrinkRaster(raster, SIDE_PX);
  const small = shrinkRaster(medium, REGION_SIDE_PX);
  const set = candidates(small, undefined, REGION_SCALES);
  const grow = medium.width / small.width;
  const toRaster = raster.width / medium.width;
  const regions = Array.from({ length: set.count }, (_, n): Box => {
    const [l, t, r, b] = [
      set.boxes[n * 4]!,
      set.boxes[n * 4 + 1]!,
      set.boxes[n * 4 + 2]!,
      set.boxes[n * 4 + 3]!,
    ];
    return [l * grow, t * grow, (r - l) * grow, (b - t) * grow];
  });
  const truth = instances
    .map(({ classId, box: [x, y, w, h] }) => ({
      classId,
      box: [x / toRaster, y / toRaster, w / toRaster, h / toRaster] as Box,
    }))
    .filter(({ box }) => box[2] >= 2 && box[3] >= 2);
  return { raster, channels: channelsOf(medium), set, grow, toRaster, regions, truth };
}

const sideOf = ({ channels }: Prepared) => Math.max(channels.width, channels.height);

/** All features of a box: cells, box features (from the smaller copy), size against the class's prior. */
function describe(image: Prepared, [x, y, w, h]: Box, prior: ExemplarClass["prior"]): Float32Array {
  const out = new Float32Array(FEATURES);
  describeWindow(image.channels, x, y, w, h, out, 0);
  const { set, grow } = image;
  const left = Math.min(set.width - 2, Math.max(0, Math.round(x / grow)));
  const top = Math.min(set.height - 2, Math.max(0, Math.round(y / grow)));
  const right = Math.min(set.width, Math.max(left + 2, Math.round((x + w) / grow)));
  const bottom = Math.min(set.height, Math.max(top + 2, Math.round((y + h) / grow)));
  boxFeatures(set.context, left, top, right, bottom, out, WINDOW_FEATURES);
  colourFeatures(set.context, left, top, right, bottom, out, WINDOW_FEATURES + BOX_FEATURES);
  const side = sideOf(image);
  const dw = (Math.log(w / side) - prior[0]) / prior[2];
  const dh = (Math.log(h / side) - prior[1]) / prior[3];
  const at = WINDOW_FEATURES + BOX_FEATURES + COLOUR_FEATURES;
  out[at] = Math.max(-4, Math.min(4, dw));
  out[at + 1] = Math.max(-4, Math.min(4, dh));
  out[at + 2] = Math.min(16, dw * dw);
  out[at + 3] = Math.min(16, dh * dh);
  out[at + 4] = Math.min(16, (dw - dh) ** 2);
  return out;
}

function verdictOf(weights: ArrayLike<number>, features: Float32Array): number {
  let sum = weights[features.length]!;
  for (let f = 0; f < features.length; f++) sum += weights[f]! * features[f]!;
  return sum;
}

type Detection = { box: Box; verdict: number; region: number };

/** Detections of one class, best first, suppressed, px of the channels. */
function detect(
  image: Prepared,
  model: Pick<ExemplarClass, "sizes" | "prior" | "search" | "verdict" | "offsets">,
  limit: number,
): Detection[] {
  const side = sideOf(image);
  const { width, height } = image.channels;
  const hits = model.sizes.flatMap(([w, h]) =>
    scanWindows(image.channels, Math.max(4, w * side), Math.max(4, h * side), model.search, SEARCH_LEAST),
  );
  const windows = hits.map(({ x, y, w, h }): Box => [x, y, w, h]);
  const searched = suppress(
    windows,
    hits.map(({ score }) => score),
    0.75,
    SEARCHED_MAX,
  );
  const found: Detection[] = [];
  const consider = (box: Box, region: number) => {
    const features = describe(image, box, model.prior);
    const verdict = verdictOf(model.verdict, features);
    found.push({ box, verdict, region });
    if (verdict < -1 || model.offsets.length < 4) return;
    let at = box;
    let known = features;
    for (let move = 0; move < MOVES; move++) {
      const [dx, dy, dw, dh] = model.offsets.map((weights) =>
        Math.max(-4, Math.min(4, verdictOf(weights, known))),
      );
      const moved = clipped(decodeBox([dx!, dy!, dw!, dh!], at), width, height);
      if (!moved) return;
      at = moved;
      known = describe(image, at, model.prior);
    }
    // The unmoved box stays as well: in crowds the move may go to the neighbour.
    found.push({ box: at, verdict: verdictOf(model.verdict, known) + MOVED_BONUS, region: -1 });
  };
  for (const index of searched) {
    const box = clipped(windows[index]!, width, height);
    if (box) consider(box, -1);
  }
  const cells = new Float32Array(WINDOW_FEATURES);
  const regions = image.regions.flatMap((box, region) => {
    if (!isPlausible(box, side, model.prior)) return [];
    describeWindow(image.channels, ...box, cells, 0);
    const score = verdictOf(model.search, cells);
    return score > SEARCH_LEAST ? [{ box, region, score }] : [];
  });
  const best = regions.sort((a, b) => b.score - a.score || a.region - b.region).slice(0, SEARCHED_MAX);
  for (const { box, region } of best) consider(box, region);
  const boxes = found.map(({ box }) => box);
  return suppress(
    boxes,
    found.map(({ verdict }) => verdict),
    NMS_IOU,
    limit,
  ).map((index) => found[index]!);
}

function isPlausible([, , w, h]: Box, side: number, prior: ExemplarClass["prior"]): boolean {
  return (
    Math.abs(Math.log(w / side) - prior[0]) < 3.5 * prior[2] &&
    Math.abs(Math.log(h / side) - prior[1]) < 3.5 * prior[3]
  );
}

function clipped([x, y, w, h]: Box, width: number, height: number): Box | undefined {
  const left = Math.max(0, x);
  const top = Math.max(0, y);
  const right = Math.min(width, x + w);
  const bottom = Math.min(height, y + h);
  // A window that mostly hangs over the side shows too little.
  return right - left > 0.45 * w && bottom - top > 0.45 * h && right - left >= 3 && bottom - top >= 3
    ? [left, top, right - left, bottom - top]
    : undefined;
}

/** Window sizes that between them meet the examples: k-means on log sizes from the spread-out quantiles (Lloyd, 1982). */
function clusterSizes(sizes: readonly (readonly [number, number])[]): [number, number][] {
  const logs = sizes
    .map(([w, h]): [number, number] => [Math.log(w), Math.log(h)])
    .sort((a, b) => a[0] + a[1] - b[0] - b[1]);
  const count = Math.max(1, Math.min(SIZES_MAX, Math.ceil(logs.length / 3)));
  let centres = Array.from(
    { length: count },
    (_, n): [number, number] => logs[Math.floor(((n + 0.5) * logs.length) / count)]!,
  );
  for (let round = 0; round < 10; round++) {
    const groups: [number, number][][] = centres.map(() => []);
    for (const log of logs) {
      let best = 0;
      centres.forEach((centre, n) => {
        if (distance(log, centre) < distance(log, centres[best]!)) best = n;
      });
      groups[best]!.push(log);
    }
    centres = groups
      .filter((group) => group.length > 0)
      .map((group) => [mean(group.map(([w]) => w)), mean(group.map(([, h]) => h))]);
  }
  // Sizes within a fifth of each other would find the same things twice.
  const distinct: [number, number][] = [];
  for (const centre of centres)
    if (distinct.every((other) => distance(centre, other) > 0.035)) distinct.push(centre);
  return distinct.map(([w, h]) => [Math.exp(w), Math.exp(h)]);
}

const distance = (a: readonly [number, number], b: readonly [number, number]) =>
  (a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2;
const mean = (values: readonly number[]) => values.reduce((sum, value) => sum + value, 0) / values.length;

function spreadOf(values: readonly number[]): number {
  const centre = mean(values);
  return Math.sqrt(mean(values.map((value) => (value - centre) ** 2)));
}

/** A copy of a box moved and resized at random by up to `amount` of its size. */
function shifted([x, y, w, h]: Box, amount: number, random: () => number): Box {
  const draw = () => (random() * 2 - 1) * amount;
  const wide = w * Math.exp(draw());
  const high = h * Math.exp(draw());
  return [x + (w - wide) / 2 + w * draw(), y + (h - high) / 2 + h * draw(), wide, high];
}

const bestIou = (box: Box, truth: readonly Box[]) =>
  truth.reduce((most, other) => Math.max(most, boxIou(box, other)), 0);

/** Learns one class from prepared pictures; undefined with too few examples. */
function learnClass(
  images: readonly Prepared[],
  classId: string,
  seed: number,
): Omit<ExemplarClass, "slope" | "offset" | "ap"> | undefined {
  const own = images.map(({ truth }) =>
    truth.filter((entry) => entry.classId === classId).map(({ box }) => box),
  );
  const examples = own.reduce((sum, boxes) => sum + boxes.length, 0);
  if (examples < EXAMPLES_MIN) return undefined;
  const random = seeded(seed);
  const shares = images.flatMap((image, n) =>
    own[n]!.map(([, , w, h]): [number, number] => [w / sideOf(image), h / sideOf(image)]),
  );
  const widths = shares.map(([w]) => Math.log(w));
  const heights = shares.map(([, h]) => Math.log(h));
  const prior: ExemplarClass["prior"] = [
    mean(widths),
    mean(heights),
    Math.max(0.12, spreadOf(widths)),
    Math.max(0.12, spreadOf(heights)),
  ];
  const sizes = clusterSizes(shares);

  // Positives: the boxes themselves, jittered copies, and regions that meet them.
  const positives: { features: Float32Array; image: number; box: Box; truth: Box }[] = [];
  const copies = Math.max(1, Math.min(12, Math.floor(POSITIVES_MAX / examples)));
  images.forEach((image, n) => {
    for (const truth of own[n]!) {
      for (let copy = 0; copy < copies && positives.length < POSITIVES_MAX; copy++) {
        const box = copy === 0 ? truth : shifted(truth, JITTER, random);
        positives.push({ features: describe(image, box, prior), image: n, box, truth });
      }
    }
    image.regions.forEach((box) => {
      if (positives.length >= POSITIVES_MAX * 1.3) return;
      const truth = own[n]!.find((other) => boxIou(box, other) >= RIGHT_IOU);
      if (truth) positives.push({ features: describe(image, box, prior), image: n, box, truth });
    });
  });

  const negatives: { features: Float32Array; verdict: number }[] = [];
  const addNegative = (image: Prepared, box: Box, truth: readonly Box[]) => {
    if (bestIou(box, truth) < WRONG_IOU)
      negatives.push({ features: describe(image, box, prior), verdict: 0 });
  };
  const perImage = Math.max(40, Math.min(250, Math.floor(900 / images.length)));
  images.forEach((image, n) => {
    // Near misses teach where an object ends.
    const misses = Math.ceil(NEAR_MISSES / examples);
    for (const truth of own[n]!)
      for (let miss = 0; miss < misses; miss++) {
        const box = shifted(truth, 0.6, random);
        if (boxIou(box, truth) > 0.15) addNegative(image, box, own[n]!);
      }
    const { width, height } = image.channels;
    for (let draw = 0; draw < perImage; draw++) {
      const [w, h] = sizes[Math.floor(random() * sizes.length)]!;
      const side = sideOf(image);
      const scale = Math.exp((random() - 0.5) * 0.5);
      const box: Box = [
        random() * Math.max(1, width - w * side),
        random() * Math.max(1, height - h * side),
        w * side * scale,
        h * side * scale,
      ];
      addNegative(image, box, own[n]!);
    }
    const step = Math.max(1, Math.floor(image.regions.length / 120));
    for (let region = 0; region < image.regions.length; region += step) {
      if (isPlausible(image.regions[region]!, sideOf(image), prior))
        addNegative(image, image.regions[region]!, own[n]!);
    }
  });

  const model = { sizes, prior, search: [] as number[], verdict: [] as number[], offsets: [] as number[][] };
  const rowsOf = (width: number) =>
    [...positives, ...negatives].map(({ features }) => features.subarray(0, width));
  const fit = (width: number, cost: number) => {
    const rows = rowsOf(width);
    const labels = Int8Array.from(rows, (_, r) => (r < positives.length ? 1 : -1));
    const costs = Float32Array.from(rows, (_, r) =>
      r < positives.length ? Math.max(1, negatives.length / positives.length / 2) : 1,
    );
    return [...fitLinear({ rows, labels, costs }, scalingOf(rows), cost, 12)];
  };
  for (let round = 0; round < ROUNDS; round++) {
    model.search = fit(WINDOW_FEATURES, 0.0005);
    model.verdict = fit(FEATURES, 0.0005);
    if (round === ROUNDS - 1) break;
    const scanned = Array.from(
      { length: Math.min(SCANNED_MAX, images.length) },
      (_, n) => (round * SCANNED_MAX + n) % images.length,
    );
    for (const n of scanned) {
      const image = images[n]!;
      const wrong = detect(image, model, 400).filter(
        ({ box, verdict }) => verdict > -1.2 && bestIou(box, own[n]!) < WRONG_IOU,
      );
      for (const { box } of wrong.slice(0, HARD_A_ROUND)) addNegative(image, box, own[n]!);
    }
    if (negatives.length > NEGATIVES_MAX) {
      for (const negative of negatives) negative.verdict = verdictOf(model.verdict, negative.features);
      negatives.sort((a, b) => b.verdict - a.verdict);
      negatives.length = NEGATIVES_MAX;
    }
  }
  if (examples >= 3) {
    const rows: Float32Array[] = [];
    const targets = [0, 1, 2, 3].map(() => [] as number[]);
    const moves = Math.max(2, Math.ceil(REGRESSED_MAX / examples));
    images.forEach((image, n) => {
      for (const truth of own[n]!) {
        for (let move = 0; move < moves && rows.length < REGRESSED_MAX; move++) {
          const box = shifted(truth, MOVE, random);
          if (boxIou(box, truth) < 0.35) continue;
          rows.push(describe(image, box, prior));
          encodeBox(truth, box).forEach((value, axis) => targets[axis]!.push(value));
        }
      }
    });
    model.offsets = fitRidge(
      rows,
      targets.map((values) => Float64Array.from(values)),
      scalingOf(rows),
      RIDGE,
    ).map((weights) => [...weights]);
  }
  return { classId, examples, ...model };
}

/**
 * Learns from a batch's settled images, class by class: cells of colour and gradient over windows of the class's own sizes,
 * joined with box features; linear classifiers with hard negatives; four-offset regression; regions beside
 * windows. Held-out images (up to `foldsMax` folds; the halves of a single image) give each class its calibrated
 * probability and the measured gain over the class-agnostic ranking; `useful` says whether it wins. A class with
 * fewer than two examples is left out. Deterministic.
 */
export function trainExemplars(
  images: readonly ExemplarImage[],
  { foldsMax = 3, seed = 1 }: TrainOptions = {},
): ExemplarModel {
  const prepared = images.map(({ raster, instances }) => prepare(raster, instances));
  // Few images teach twice as much with their mirror images; measuring goes without.
  const mirrored =
    images.length <= MIRRORED_MAX
      ? images.map(mirror).map(({ raster, instances }) => prepare(raster, instances))
      : [];
  const classIds = [...new Set(prepared.flatMap(({ truth }) => truth.map(({ classId }) => classId)))].sort();
  // With one image its halves are held out in turn; a few objects are too few to judge by.
  const judged = images.length > 1 ? prepared : halves(images[0]);
  // With many classes two folds must do: measuring should not take longer than learning.
  const folds = Math.min(classIds.length > 2 ? 2 : foldsMax, judged.length);
  const found = new Map<string, Found[]>();
  const agnostic: Found[] = [];
  const truth = judged.flatMap((image, n) =>
    image.truth.map(({ classId, box }) => ({ image: n, classId, box })),
  );
  for (let fold = 0; folds > 1 && fold < folds; fold++) {
    const teaching = judged.filter((_, n) => n % folds !== fold);
    const models = classIds.map((classId) => learnClass(teaching, classId, seed));
    judged.forEach((image, n) => {
      if (n % folds !== fold) return;
      const ranked = rankCandidates(image.set, 100);
      for (const at of ranked.order)
        agnostic.push({ image: n, box: image.regions[at]!, score: ranked.scores[at]! });
      models.forEach((model, index) => {
        if (!model) return;
        const list = found.get(classIds[index]!) ?? [];
        found.set(classIds[index]!, list);
        for (const { box, verdict } of detect(image, model, 100))
          list.push({ image: n, box, score: verdict });
      });
    });
  }
  const measured = folds > 1;
  const withModel: number[] = [];
  const without: number[] = [];
  const classes = classIds.flatMap((classId): ExemplarClass[] => {
    const learned = learnClass([...prepared, ...mirrored], classId, seed);
    const examples = prepared.reduce(
      (sum, image) => sum + image.truth.filter((entry) => entry.classId === classId).length,
      0,
    );
    const own = truth.filter((entry) => entry.classId === classId);
    const list = found.get(classId) ?? [];
    const ap = measured && own.length > 0 ? averagePrecision(list, own) : null;
    if (ap !== null) {
      withModel.push(ap.value);
      without.push(averagePrecision(agnostic, own).value);
    }
    if (!learned || examples < EXAMPLES_MIN) return [];
    const { slope, offset } = ap ? calibrated(list, ap.hits) : { slope: 1.5, offset: -1 };
    return [rounded({ ...learned, examples, slope, offset, ap: ap?.value ?? null })];
  });
  const apWith = withModel.length > 0 ? mean(withModel) : null;
  const apWithout = without.length > 0 ? mean(without) : null;
  const useful =
    classes.length > 0 &&
    apWith !== null &&
    apWithout !== null &&
    apWith >= AP_MIN &&
    apWith >= apWithout + GAIN_MIN;
  return { version: 2, classes, apWith, apWithout, useful };
}

function mirror({ raster: { width, height, data }, instances }: ExemplarImage): ExemplarImage {
  const turned = new Uint8Array(data.length);
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const from = (y * width + x) * 3;
      const to = (y * width + width - 1 - x) * 3;
      for (let c = 0; c < 3; c++) turned[to + c] = data[from + c]!;
    }
  }
  return {
    raster: { width, height, data: turned },
    instances: instances.map(({ classId, box: [x, y, w, h] }) => ({
      classId,
      box: [width - x - w, y, w, h] as Box,
    })),
  };
}

/** The two halves of an image as images, each with the objects whose centre it holds; none with under six objects. */
function halves(image: ExemplarImage | undefined): Prepared[] {
  if (!image || image.instances.length < 6) return [];
  const { raster, instances } = image;
  const centres = instances.map(({ box }) => box[0] + box[2] / 2).sort((a, b) => a - b);
  const middle = Math.round(
    Math.min(raster.width * 0.7, Math.max(raster.width * 0.3, centres[centres.length >> 1]!)),
  );
  if (middle < 32 || raster.width - middle < 32) return [];
  return [
    { left: 0, width: middle },
    { left: middle, width: raster.width - middle },
  ].map(({ left, width }) => {
    const half = prepare(
      cutRaster(raster, left, 0, width, raster.height),
      instances
        .filter(({ box }) => box[0] + box[2] / 2 >= left && box[0] + box[2] / 2 < left + width)
        .map(({ classId, box: [x, y, w, h] }) => ({ classId, box: [x - left, y, w, h] as Box })),
    );
    return half;
  });
}

/** Platt's two numbers (1999) from held-out verdicts. */
function calibrated(list: readonly Found[], hits: readonly boolean[]): { slope: number; offset: number } {
  const right = hits.filter(Boolean).length;
  if (right === 0 || right === hits.length) return { slope: 1.5, offset: right === 0 ? -2 : 1 };
  const [offset = 0, slope = 1] = fitLogistic(
    list.map(({ score }, n) => ({ features: [1, score], positive: hits[n]!, weight: 1 })),
    0.05,
    30,
  );
  return slope > 0 ? { slope, offset } : { slope: 1, offset: -2 };
}

function rounded(model: ExemplarClass): ExemplarClass {
  return JSON.parse(
    JSON.stringify(model, (_, value: unknown) =>
      typeof value === "number" ? Number(value.toPrecision(6)) : value,
    ),
  ) as ExemplarClass;
}

/** Detections of all classes with their probability, px of the channels. */
export function detectionsOf(
  raster: Raster,
  model: ExemplarModel,
  limit: number,
): { box: Box; classId: string; score: number; image: Prepared; region: number }[] {
  const image = prepare(raster, []);
  const all = model.classes.flatMap((entry) =>
    detect(image, entry, limit).map(({ box, verdict, region }) => ({
      box,
      classId: entry.classId,
      score: 1 / (1 + Math.exp(-(entry.slope * verdict + entry.offset))),
      image,
      region,
    })),
  );
  // One object has one class: the likeliest stays.
  const boxes = all.map(({ box }) => box);
  return suppress(
    boxes,
    all.map(({ score }) => score),
    0.6,
    limit,
  ).map((index) => all[index]!);
}

/** Share of probability below which a detection is left to the class-agnostic proposals. */
const SCORE_MIN = 0.05;

/** A model's proposals for a picture, px of the raster, with outlines. */
export function detectExemplars(raster: Raster, model: ExemplarModel, limit: number): Proposal[] {
  const found = detectionsOf(raster, model, limit).filter(({ score }) => score >= SCORE_MIN);
  return byScore(found.map(({ score }) => score)).map((index): Proposal => {
    const {
      box: [x, y, w, h],
      classId,
      score,
      image,
    } = found[index]!;
    const box: Box = [x * image.toRaster, y * image.toRaster, w * image.toRaster, h * image.toRaster];
    return { box, rings: outlineInBox(raster, box).rings, score, classId, source: "exemplar" };
  });
}
