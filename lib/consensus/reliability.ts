import { assign } from "./assignment";
import { findCopies, type TwinCounts } from "./copies";
import { groupImage, judgeImage } from "./mergeImage";
import { prepareImage, tookTheSame, type PreparedImage } from "./prepare";
import { COPY_IOU_MIN } from "./prepare";
import { iouLogit, predictIou } from "./predict";
import { drawnIou, regionIou, spansOf, type Spans } from "./spans";
import {
  DEFAULT_SETTINGS,
  type AnnotatorReliability,
  type ConsensusSettings,
  type Estimate,
  type ImageLabels,
  type LabelledInstance,
  type Reliability,
} from "./types";
import { logInvented, typicalReliability } from "./votes";

/** Known truth of some images of the batch, by index into the images. */
export type Gold = ReadonlyMap<number, readonly LabelledInstance[]>;

/** What is kept of an image: about three kilobytes (bench:consensus -- --only speed), no outlines. */
export type ImageRecord = {
  annotatorIds: readonly string[];
  /** Share of a vote: 1 for the independent, 1 / k for each of k people whose labels here are copies. */
  weights: readonly number[];
  /** Classes that are named in the image; the numbers of `said` and `truth` count them, NOTHING is none. */
  classIds: readonly string[];
  /** What each annotator called each candidate, candidates x annotators. */
  said: Int16Array;
  /** What gold calls each candidate, UNKNOWN where it is not gold. */
  truth: Int16Array;
  /** Two annotators' drawings of the same objects: indices into annotatorIds, the sum of 1 - IoU, how many. */
  pairs: readonly (readonly [a: number, b: number, loss: number, count: number])[];
  /** IoU of an annotator's drawing with gold: index, IoU. */
  goldIous: readonly (readonly [annotator: number, iou: number])[];
  instances: readonly number[];
  taken: readonly number[];
  twins: readonly (readonly [a: number, b: number, close: number, matched: number])[];
  /** Drawings of each annotator that somebody else's all but equals. */
  twinned: readonly number[];
  isGold: boolean;
};

const NOTHING = -1;
const UNKNOWN = -2;

/** Prior strength, in observations, of what is common to all annotators. */
const STRENGTH = { person: 4, row: 6, inventions: 4, pooled: 2, outline: 6, coincidence: 10, objects: 1 };
/** A gold drawing says as much about an outline as this many comparisons with others. */
const GOLD_WEIGHT = 3;
const ITERATIONS_MAX = 200;
const TOLERANCE = 1e-7;

/**
 * Estimates, from a whole batch, how far each annotator can be trusted: existence and class by Dawid and Skene's EM
 * (1979) with the extra class "nothing", shrunk towards what is common to all, and outlines by an additive model of
 * pairwise loss. Copies of one another, and of the untouched proposals, share one vote. `gold` pins the truth
 * of some images and so fixes the scale. Deterministic. O(iterations x votes x classes) after grouping.
 */
export function estimateReliability(
  images: readonly ImageLabels[],
  options: { settings?: Partial<ConsensusSettings>; gold?: Gold } = {},
): Reliability {
  const batch = new ReliabilityBatch(options.settings);
  images.forEach((labels, index) => batch.put(String(index), labels, options.gold?.get(index)));
  return batch.estimate();
}

/**
 * The same estimate kept up to date as submissions arrive. `put` regroups one image only; `estimate` runs
 * the EM over all cached votes from its usual start, so its answer is the one from scratch, not near it.
 */
export class ReliabilityBatch {
  private readonly settings: ConsensusSettings;
  private readonly records = new Map<string, ImageRecord>();
  private readonly goldImages = new Map<
    string,
    { labels: ImageLabels; truth: readonly LabelledInstance[] }
  >();

  constructor(settings: Partial<ConsensusSettings> = {}) {
    this.settings = { ...DEFAULT_SETTINGS, ...settings };
  }

  /** Takes in one image's labels, replacing what was known of the image. */
  put(key: string, labels: ImageLabels, truth?: readonly LabelledInstance[]): void {
    this.records.set(key, recordOf(labels, this.settings, truth));
    if (truth) this.goldImages.set(key, { labels, truth });
    else this.goldImages.delete(key);
  }

  remove(key: string): void {
    this.records.delete(key);
    this.goldImages.delete(key);
  }

  /** In order of key, whatever the order of arrival. */
  estimate(): Reliability {
    const keys = [...this.records.keys()].sort();
    const reliability = estimateFrom(keys.map((key) => this.records.get(key)!));
    const gold = [...this.goldImages.keys()].sort().map((key) => this.goldImages.get(key)!);
    return { ...reliability, iouShift: shiftFrom(gold, this.settings, reliability) };
  }
}

/** Groups one image and keeps what the estimate needs. */
export function recordOf(
  labels: ImageLabels,
  settings: ConsensusSettings,
  truth?: readonly LabelledInstance[],
): ImageRecord {
  const image = prepareImage(labels);
  const { list } = groupImage(image, settings);
  const sharers = new Int32Array(image.annotatorIds.length);
  for (const voter of image.voterOf) sharers[voter]!++;
  const clusterOf = new Int32Array(image.items.length).fill(-1);
  list.forEach(({ members }, c) => members.forEach((item) => (clusterOf[item] = c)));
  const people = image.annotatorIds.length;
  const pairs = new Map<number, [number, number, number, number]>();
  for (const { a, b, iou } of image.pairs) {
    if (clusterOf[a] !== clusterOf[b] || clusterOf[a]! < 0) continue;
    const x = image.items[a]!;
    const y = image.items[b]!;
    if (x.voter === y.voter || tookTheSame(x.instance, y.instance)) continue;
    const key = x.annotator * people + y.annotator;
    const entry = pairs.get(key) ?? [x.annotator, y.annotator, 0, 0];
    entry[2] += 1 - iou;
    entry[3] += 1;
    pairs.set(key, entry);
  }
  const candidates: VotedCandidate[] = list.map(({ saidBy }) => ({
    said: [...saidBy].map((item) => (item < 0 ? null : image.items[item]!.instance.classId)),
  }));
  const goldIous: [number, number][] = [];
  if (truth) pinToGold(image, list, candidates, truth, goldIous);
  return {
    annotatorIds: image.annotatorIds,
    weights: [...image.voterOf].map((voter) => 1 / sharers[voter]!),
    ...packed(candidates),
    pairs: [...pairs.values()],
    goldIous,
    instances: image.itemsOf.map((items) => items.length),
    taken: image.itemsOf.map(
      (items) => items.filter((item) => image.items[item]!.instance.origin === "taken").length,
    ),
    twins: twinsOf(image),
    twinned: twinnedOf(image),
    isGold: truth !== undefined,
  };
}

/** One candidate as the votes see it: what each annotator of the image called it, null for nothing. */
type VotedCandidate = { said: (string | null)[]; truth?: string | null };

function packed(candidates: readonly VotedCandidate[]): Pick<ImageRecord, "classIds" | "said" | "truth"> {
  const classIds: string[] = [];
  const indexOf = (classId: string | null): number => {
    if (classId === null) return NOTHING;
    const known = classIds.indexOf(classId);
    return known >= 0 ? known : classIds.push(classId) - 1;
  };
  return {
    said: Int16Array.from(candidates.flatMap(({ said }) => said.map(indexOf))),
    truth: Int16Array.from(candidates, ({ truth }) => (truth === undefined ? UNKNOWN : indexOf(truth))),
    classIds,
  };
}

/** Close and matched pairs of instances per pair of annotators, for the detection of copies. */
function twinsOf(image: PreparedImage): [number, number, number, number][] {
  const count = image.annotatorIds.length;
  const found = new Map<number, [number, number, number, number]>();
  for (const { a, b, iou } of image.pairs) {
    if (iou < 0.5 || tookTheSame(image.items[a]!.instance, image.items[b]!.instance)) continue;
    const from = image.items[a]!.annotator;
    const to = image.items[b]!.annotator;
    const entry = found.get(from * count + to) ?? [from, to, 0, 0];
    entry[3]++;
    if (iou >= COPY_IOU_MIN) entry[2]++;
    found.set(from * count + to, entry);
  }
  return [...found.values()];
}

function twinnedOf(image: PreparedImage): number[] {
  const twinned = new Set<number>();
  for (const { a, b, iou } of image.pairs) {
    if (iou < COPY_IOU_MIN || tookTheSame(image.items[a]!.instance, image.items[b]!.instance)) continue;
    twinned.add(a).add(b);
  }
  return image.itemsOf.map((items) => items.filter((item) => twinned.has(item)).length);
}

/** Truth of each candidate by the best total IoU (over one half); objects that nobody drew become candidates too. */
function pinToGold(
  image: PreparedImage,
  list: readonly { members: readonly number[]; medoid: number }[],
  candidates: VotedCandidate[],
  truth: readonly LabelledInstance[],
  goldIous: [number, number][],
): void {
  const shapes: Spans[] = truth.map(({ shape }) => spansOf(shape));
  const medoids = list.map(({ medoid }) => image.items[medoid]!.spans);
  const ious = medoids.map((spans) => shapes.map((shape) => drawnIou(spans, shape)));
  const objectOf = assign(ious.map((row) => row.map((iou) => (iou > 0.5 ? 1 - iou : 2))));
  const met = new Set<number>();
  candidates.forEach((candidate, c) => {
    const object = objectOf[c] ?? -1;
    const matched = object >= 0 && (ious[c]?.[object] ?? 0) > 0.5;
    candidate.truth = matched ? truth[object]!.classId : null;
    if (!matched) return;
    met.add(object);
    for (const item of list[c]!.members) {
      const { annotator, spans } = image.items[item]!;
      if (spans.isBox === shapes[object]!.isBox)
        goldIous.push([annotator, regionIou(spans, shapes[object]!)]);
    }
  });
  truth.forEach(({ classId }, object) => {
    if (!met.has(object)) candidates.push({ said: image.annotatorIds.map(() => null), truth: classId });
  });
}

type Tables = {
  rows: Float64Array;
  inventions: Float64Array;
  inventedClass: Float64Array;
  objects: Float64Array;
  coincidence: number;
  found: Float64Array;
  real: Float64Array;
  right: Float64Array;
};

/** The EM over records; see estimateReliability. */
export function estimateFrom(records: readonly ImageRecord[]): Reliability {
  const ids = [...new Set(records.flatMap(({ annotatorIds }) => annotatorIds))].sort();
  const classIds = [...new Set(records.flatMap(({ classIds: named }) => named))].sort();
  const typical = typicalReliability(classIds);
  if (ids.length === 0 || classIds.length === 0) return { ...typical, annotators: blank(ids, typical) };
  const idIndex = new Map(ids.map((id, k) => [id, k]));
  const classIndex = new Map(classIds.map((id, k) => [id, k]));
  const twins = new TwinTotals(ids.length);
  for (const record of records) twins.add(record, (k) => idIndex.get(record.annotatorIds[k]!)!);
  const { copies, copyOf, closeOf } = findCopies(ids, twins);
  const flat = flatten(records, idIndex, classIndex, closeOf);
  const { posterior, tables, iterations, converged } = runEm(flat, ids.length, classIds.length, typical);
  const outline = outlineLosses(records, ids.length, idIndex);
  return describe(records, ids, classIds, typical, flat, posterior, tables, outline, copies, copyOf, {
    iterations,
    converged,
  });
}

function blank(ids: readonly string[], { typical }: Reliability): Record<string, AnnotatorReliability> {
  return Object.fromEntries(ids.map((annotatorId) => [annotatorId, { ...typical, annotatorId }]));
}

class TwinTotals implements TwinCounts {
  readonly close: Float64Array;
  readonly matched: Float64Array;
  readonly drawn: Float64Array;
  readonly taken: Float64Array;
  readonly images: Float64Array;
  readonly twinned: Float64Array;
  readonly others: Float64Array;
  constructor(readonly count: number) {
    this.close = new Float64Array(count * count);
    this.matched = new Float64Array(count * count);
    this.drawn = new Float64Array(count);
    this.taken = new Float64Array(count);
    this.images = new Float64Array(count);
    this.twinned = new Float64Array(count);
    this.others = new Float64Array(count);
  }
  add(record: ImageRecord, indexOf: (local: number) => number): void {
    record.annotatorIds.forEach((_, local) => {
      const k = indexOf(local);
      this.drawn[k]! += record.instances[local]!;
      this.taken[k]! += record.taken[local]!;
      this.images[k]! += 1;
      this.twinned[k]! += record.twinned[local]!;
      this.others[k]! += record.annotatorIds.length - 1;
    });
    for (const [a, b, close, matched] of record.twins) {
      const x = indexOf(a);
      const y = indexOf(b);
      for (const cell of [x * this.count + y, y * this.count + x]) {
        this.close[cell]! += close;
        this.matched[cell]! += matched;
      }
    }
  }
}

/** All votes in flat arrays: candidate i owns votes offsets[i] .. offsets[i + 1). */
type FlatVotes = {
  offsets: Int32Array;
  annotators: Int32Array;
  said: Int16Array;
  weights: Float64Array;
  /** Weighted votes for something, and weighted people, per candidate. */
  drawn: Float64Array;
  people: Float64Array;
  truth: Int16Array;
  /** Images in all, and per annotator. */
  imageCount: number;
  imagesOf: Float64Array;
};

function flatten(
  records: readonly ImageRecord[],
  idIndex: ReadonlyMap<string, number>,
  classIndex: ReadonlyMap<string, number>,
  closeOf: (a: number, b: number) => boolean,
): FlatVotes {
  const nothing = classIndex.size;
  let items = 0;
  let votes = 0;
  for (const { said, truth } of records) {
    items += truth.length;
    votes += said.length;
  }
  const flat: FlatVotes = {
    offsets: new Int32Array(items + 1),
    annotators: new Int32Array(votes),
    said: new Int16Array(votes),
    weights: new Float64Array(votes),
    drawn: new Float64Array(items),
    people: new Float64Array(items),
    truth: new Int16Array(items).fill(-1),
    imageCount: records.length,
    imagesOf: new Float64Array(idIndex.size),
  };
  let item = 0;
  let vote = 0;
  for (const record of records) {
    const people = record.annotatorIds.map((id) => idIndex.get(id)!);
    // People whom the whole batch shows to copy each other share a vote here even if this image alone does not show it.
    const weights = record.weights.map((weight, k) => {
      const alike = people.filter((other, j) => j !== k && closeOf(people[k]!, other)).length;
      return Math.min(weight, 1 / (1 + alike));
    });
    for (const k of people) flat.imagesOf[k]! += 1;
    const classOf = record.classIds.map((id) => classIndex.get(id)!);
    const numberOf = (own: number) => (own === NOTHING ? nothing : classOf[own]!);
    for (let c = 0; c < record.truth.length; c++) {
      for (let k = 0; k < people.length; k++) {
        const said = numberOf(record.said[c * people.length + k]!);
        flat.annotators[vote] = people[k]!;
        flat.said[vote] = said;
        flat.weights[vote] = weights[k]!;
        flat.people[item]! += weights[k]!;
        if (said !== nothing) flat.drawn[item]! += weights[k]!;
        vote++;
      }
      if (record.truth[c] !== UNKNOWN) flat.truth[item] = numberOf(record.truth[c]!);
      item++;
      flat.offsets[item] = vote;
    }
  }
  return flat;
}

function runEm(
  flat: FlatVotes,
  people: number,
  classCount: number,
  typical: Reliability,
): { posterior: Float64Array; tables: Tables; iterations: number; converged: boolean } {
  const size = classCount + 1;
  const items = flat.drawn.length;
  const posterior = new Float64Array(items * size);
  for (let i = 0; i < items; i++) startFromShares(flat, i, size, posterior);
  let iterations = 0;
  let moved = Infinity;
  let tables = maximise(flat, posterior, people, classCount, typical);
  const scores = new Float64Array(size);
  while (iterations < ITERATIONS_MAX && moved > TOLERANCE) {
    iterations++;
    moved = expect(flat, tables, classCount, posterior, scores);
    tables = maximise(flat, posterior, people, classCount, typical);
  }
  return { posterior, tables, iterations, converged: moved <= TOLERANCE };
}

function startFromShares(flat: FlatVotes, i: number, size: number, posterior: Float64Array): void {
  const truth = flat.truth[i]!;
  if (truth >= 0) {
    posterior[i * size + truth] = 1;
    return;
  }
  let total = 0;
  for (let v = flat.offsets[i]!; v < flat.offsets[i + 1]!; v++) {
    posterior[i * size + flat.said[v]!]! += flat.weights[v]!;
    total += flat.weights[v]!;
  }
  for (let t = 0; t < size; t++) posterior[i * size + t]! /= total;
}

function expect(
  flat: FlatVotes,
  { rows, inventions, inventedClass, objects, coincidence }: Tables,
  classCount: number,
  posterior: Float64Array,
  scores: Float64Array,
): number {
  const size = classCount + 1;
  const logRows = rows.map(Math.log);
  const logObjects = objects.map(Math.log);
  const logCoincidence = Math.log(coincidence);
  const logInventedClass = inventedClass.map(Math.log);
  let moved = 0;
  for (let i = 0; i < flat.drawn.length; i++) {
    if (flat.truth[i]! >= 0) continue;
    scores.set(logObjects);
    let inventedBy = 0;
    let named = 0;
    for (let v = flat.offsets[i]!; v < flat.offsets[i + 1]!; v++) {
      const annotator = flat.annotators[v]!;
      const said = flat.said[v]!;
      const weight = flat.weights[v]!;
      const base = annotator * classCount * size + said;
      for (let t = 0; t < classCount; t++) scores[t]! += weight * logRows[base + t * size]!;
      if (said === classCount) continue;
      inventedBy += weight * inventions[annotator]!;
      named += weight * logInventedClass[said]!;
    }
    scores[classCount] = logInvented(flat.drawn[i]!, inventedBy, logCoincidence, 1) + named;
    let best = -Infinity;
    for (let t = 0; t < size; t++) if (scores[t]! > best) best = scores[t]!;
    let sum = 0;
    for (let t = 0; t < size; t++) sum += scores[t] = Math.exp(scores[t]! - best);
    for (let t = 0; t < size; t++) {
      const p = scores[t]! / sum;
      const change = Math.abs(p - posterior[i * size + t]!);
      if (change > moved) moved = change;
      posterior[i * size + t] = p;
    }
  }
  return moved;
}

function maximise(
  flat: FlatVotes,
  posterior: Float64Array,
  people: number,
  classCount: number,
  typical: Reliability,
): Tables {
  const size = classCount + 1;
  const rows = new Float64Array(people * classCount * size);
  const objects = new Float64Array(classCount);
  let repeats = STRENGTH.coincidence * typical.coincidence;
  let repeatChances = STRENGTH.coincidence;
  const invented = new Float64Array(people);
  const inventedClass = new Float64Array(classCount);
  for (let i = 0; i < flat.drawn.length; i++) {
    for (let t = 0; t < classCount; t++) objects[t]! += posterior[i * size + t]!;
    const absent = posterior[i * size + classCount]!;
    const drawn = flat.drawn[i]!;
    repeats += absent * Math.max(0, drawn - 1);
    repeatChances += absent * Math.max(0, flat.people[i]! - 1);
    for (let v = flat.offsets[i]!; v < flat.offsets[i + 1]!; v++) {
      const annotator = flat.annotators[v]!;
      const said = flat.said[v]!;
      const base = annotator * classCount * size + said;
      for (let t = 0; t < classCount; t++) rows[base + t * size]! += posterior[i * size + t]!;
      if (said < classCount) {
        // One of those who drew it began; which one, nobody knows.
        invented[annotator]! += (absent * flat.weights[v]!) / drawn;
        inventedClass[said]! += absent;
      }
    }
  }
  for (let t = 0; t < classCount; t++) {
    const prior = STRENGTH.objects * typical.objectsPerImage[t]!;
    objects[t] = (objects[t]! + prior) / (flat.imageCount + STRENGTH.objects);
  }
  // What all have in common: detection, right class given detection, and where wrong classes go.
  const common = new Float64Array(classCount * size);
  for (let t = 0; t < classCount; t++) {
    for (let v = 0; v < size; v++) common[t * size + v] = STRENGTH.pooled * typical.typical.confusion[t]![v]!;
    for (let a = 0; a < people; a++) {
      for (let v = 0; v < size; v++) common[t * size + v]! += rows[(a * classCount + t) * size + v]!;
    }
  }
  const found = new Float64Array(people);
  const real = new Float64Array(people);
  const right = new Float64Array(people);
  let allFound = 0;
  let allReal = 0;
  let allRight = 0;
  for (let t = 0; t < classCount; t++) {
    for (let v = 0; v < size; v++) {
      allReal += common[t * size + v]!;
      if (v < classCount) allFound += common[t * size + v]!;
    }
    allRight += common[t * size + t]!;
  }
  const detection = allFound / allReal;
  const rightness = allRight / allFound;
  for (let a = 0; a < people; a++) {
    for (let t = 0; t < classCount; t++) {
      const base = (a * classCount + t) * size;
      for (let v = 0; v < size; v++) {
        real[a]! += rows[base + v]!;
        if (v < classCount) found[a]! += rows[base + v]!;
      }
      right[a]! += rows[base + t]!;
    }
    const ownDetection = (found[a]! + STRENGTH.person * detection) / (real[a]! + STRENGTH.person);
    const ownRight = (right[a]! + STRENGTH.person * rightness) / (found[a]! + STRENGTH.person);
    for (let t = 0; t < classCount; t++) {
      const base = (a * classCount + t) * size;
      let wrong = 0;
      for (let v = 0; v < classCount; v++) if (v !== t) wrong += common[t * size + v]!;
      let sum = 0;
      for (let v = 0; v < size; v++) sum += rows[base + v]!;
      for (let v = 0; v < size; v++) {
        const prior =
          v === classCount
            ? 1 - ownDetection
            : classCount === 1
              ? ownDetection
              : v === t
                ? ownDetection * ownRight
                : (ownDetection * (1 - ownRight) * common[t * size + v]!) / wrong;
        rows[base + v] = (rows[base + v]! + STRENGTH.row * Math.max(prior, 1e-6)) / (sum + STRENGTH.row);
      }
    }
  }
  const inventions = new Float64Array(people);
  const allInvented = invented.reduce((sum, count) => sum + count, typical.typical.inventions);
  const allImages = flat.imagesOf.reduce((sum, count) => sum + count, 1);
  for (let a = 0; a < people; a++) {
    const prior = (STRENGTH.inventions * allInvented) / allImages;
    inventions[a] = (invented[a]! + prior) / (flat.imagesOf[a]! + STRENGTH.inventions);
  }
  const classTotal = inventedClass.reduce((sum, count) => sum + count, classCount);
  for (let t = 0; t < classCount; t++) inventedClass[t] = (inventedClass[t]! + 1) / classTotal;
  return {
    rows,
    inventions,
    inventedClass,
    objects,
    coincidence: repeats / repeatChances,
    found,
    real,
    right,
  };
}

type OutlineLosses = { loss: Float64Array; weight: Float64Array; typical: number };

/**
 * Loss of each annotator's outlines (1 - IoU with the truth) from the losses between pairs, taken as the sum
 * of the two annotators' own; solved by alternating means, and pulled to the mean by STRENGTH.outline.
 */
function outlineLosses(
  records: readonly ImageRecord[],
  people: number,
  idIndex: ReadonlyMap<string, number>,
): OutlineLosses {
  const sums = new Map<number, { loss: number; count: number }>();
  const goldLoss = new Float64Array(people);
  const goldCount = new Float64Array(people);
  let total = 0;
  let count = 0;
  for (const { pairs, annotatorIds, goldIous } of records) {
    for (const [a, b, lossOfPair, countOfPair] of pairs) {
      const x = idIndex.get(annotatorIds[a]!)!;
      const y = idIndex.get(annotatorIds[b]!)!;
      const key = Math.min(x, y) * people + Math.max(x, y);
      const entry = sums.get(key) ?? { loss: 0, count: 0 };
      entry.loss += lossOfPair;
      entry.count += countOfPair;
      sums.set(key, entry);
      total += lossOfPair;
      count += countOfPair;
    }
    for (const [annotator, iou] of goldIous) {
      const x = idIndex.get(annotatorIds[annotator]!)!;
      goldLoss[x]! += GOLD_WEIGHT * (1 - iou);
      goldCount[x]! += GOLD_WEIGHT;
    }
  }
  const typical = Math.max(0.02, count > 0 ? total / count / 2 : 0.15);
  const loss = new Float64Array(people).fill(typical);
  const entries = [...sums].sort(([a], [b]) => a - b);
  for (let iteration = 0; iteration < 50; iteration++) {
    const own = new Float64Array(people).fill(STRENGTH.outline * typical);
    const seen = new Float64Array(people).fill(STRENGTH.outline);
    for (const [key, entry] of entries) {
      const a = Math.floor(key / people);
      const b = key % people;
      own[a]! += entry.loss - entry.count * loss[b]!;
      own[b]! += entry.loss - entry.count * loss[a]!;
      seen[a]! += entry.count;
      seen[b]! += entry.count;
    }
    for (let a = 0; a < people; a++) {
      const next = Math.max(0.15 * typical, (own[a]! + goldLoss[a]!) / (seen[a]! + goldCount[a]!));
      // Half steps: the alternation would swing between two solutions where only two people share images.
      loss[a] = (loss[a]! + next) / 2;
    }
  }
  const weight = loss.map((own) => Math.min(6, Math.max(0.1, (typical / own) ** OUTLINE_POWER)));
  return { loss, weight, typical };
}

/** Inverse variance would be 2. */
const OUTLINE_POWER = 2;

function describe(
  records: readonly ImageRecord[],
  ids: readonly string[],
  classIds: readonly string[],
  typical: Reliability,
  flat: FlatVotes,
  posterior: Float64Array,
  tables: Tables,
  outline: OutlineLosses,
  copies: Reliability["copies"],
  copyOf: readonly (string | null)[],
  { iterations, converged }: { iterations: number; converged: boolean },
): Reliability {
  const classCount = classIds.length;
  const size = classCount + 1;
  const images = new Float64Array(ids.length);
  const goldImages = new Float64Array(ids.length);
  const instances = new Float64Array(ids.length);
  const idIndex = new Map(ids.map((id, k) => [id, k]));
  for (const record of records) {
    record.annotatorIds.forEach((id, local) => {
      const k = idIndex.get(id)!;
      images[k]! += 1;
      instances[k]! += record.instances[local]!;
      if (record.isGold) goldImages[k]! += 1;
    });
  }
  const drawn = new Float64Array(ids.length);
  const rightly = new Float64Array(ids.length);
  const falsely = new Float64Array(ids.length);
  for (let i = 0; i < flat.drawn.length; i++) {
    for (let v = flat.offsets[i]!; v < flat.offsets[i + 1]!; v++) {
      const said = flat.said[v]!;
      if (said === classCount) continue;
      const a = flat.annotators[v]!;
      drawn[a]! += 1;
      rightly[a]! += posterior[i * size + said]!;
      falsely[a]! += posterior[i * size + classCount]!;
    }
  }
  const annotators: Record<string, AnnotatorReliability> = {};
  ids.forEach((annotatorId, a) => {
    const confusion: number[][] = [];
    for (let t = 0; t < classCount; t++) {
      const base = (a * classCount + t) * size;
      confusion.push([...tables.rows.subarray(base, base + size)]);
    }
    // Of what is not there: drawn by chance where somebody else drew it.
    const rate = tables.coincidence;
    confusion.push([...[...tables.inventedClass].map((share) => share * rate), 1 - rate]);
    const loss = outline.loss[a]!;
    const errors = drawn[a]! - rightly[a]! + (tables.real[a]! - rightly[a]!);
    const prior = STRENGTH.person;
    const quality =
      ((rightly[a]! + prior * typical.typical.detection.value * 0.9) * (1 - loss)) /
      (rightly[a]! + errors / 2 + prior);
    annotators[annotatorId] = {
      annotatorId,
      images: images[a]!,
      instances: instances[a]!,
      detection: wilson(tables.found[a]!, tables.real[a]!),
      falseAlarm: wilson(falsely[a]!, drawn[a]!),
      confusion,
      inventions: tables.inventions[a]!,
      outlineWeight: outline.weight[a]!,
      outlineLoss: loss,
      quality: Math.min(1, Math.max(0, quality)),
      goldImages: goldImages[a]!,
      copyOf: copyOf[a]!,
    };
  });
  return {
    classIds: [...classIds],
    objectsPerImage: [...tables.objects],
    coincidence: tables.coincidence,
    annotators,
    typical: { ...typical.typical, ...commonRow(annotators, typical, outline.typical) },
    copies: [...copies],
    iouShift: 0,
    iterations,
    converged,
  };
}

/** The typical annotator of this batch, for people who are new to it. */
function commonRow(
  annotators: Record<string, AnnotatorReliability>,
  { typical }: Reliability,
  outlineLoss: number,
): Partial<AnnotatorReliability> {
  const all = Object.values(annotators).filter(({ instances }) => instances > 0);
  if (all.length === 0) return { outlineLoss };
  const mean = (of: (annotator: AnnotatorReliability) => number) =>
    all.reduce((sum, annotator) => sum + of(annotator), 0) / all.length;
  const confusion = typical.confusion.map((row, t) =>
    row.map((_, v) => mean(({ confusion: own }) => own[t]![v]!)),
  );
  const detection = mean(({ detection: own }) => own.value);
  return {
    confusion,
    detection: { value: detection, low: 0, high: 1 },
    falseAlarm: { value: mean(({ falseAlarm }) => falseAlarm.value), low: 0, high: 1 },
    inventions: mean(({ inventions }) => inventions),
    quality: mean(({ quality }) => quality),
    outlineLoss,
  };
}

/** A share with its 95 % interval (Wilson, 1927); counts need not be whole. The whole range when nothing was seen. */
export function wilson(successes: number, trials: number): Estimate {
  if (trials < 1e-9) return { value: 0, low: 0, high: 1 };
  const z = 1.96;
  const p = Math.min(1, Math.max(0, successes / trials));
  const denominator = 1 + (z * z) / trials;
  const middle = (p + (z * z) / (2 * trials)) / denominator;
  const half = (z / denominator) * Math.sqrt((p * (1 - p)) / trials + (z * z) / (4 * trials * trials));
  return { value: p, low: Math.max(0, middle - half), high: Math.min(1, middle + half) };
}

/**
 * The shift in logits at which predicted and measured IoU on gold images have the same mean; shrunk while they
 * are few, as if SHIFT_PRIOR further objects had shown no need of one.
 */
function shiftFrom(
  gold: readonly { labels: ImageLabels; truth: readonly LabelledInstance[] }[],
  settings: ConsensusSettings,
  reliability: Reliability,
): number {
  const predicted: number[] = [];
  let measured = 0;
  for (const { labels, truth } of gold) {
    const shapes = truth.map(({ shape }) => spansOf(shape));
    for (const { fused, fusion } of judgeImage(labels, settings, reliability).judged) {
      if (!fused) continue;
      const spans = spansOf(fused.shape);
      const best = shapes.reduce((most, shape) => Math.max(most, drawnIou(spans, shape)), 0);
      if (best <= 0.3) continue;
      predicted.push(iouLogit(predictIou(fusion)));
      measured += best;
    }
  }
  if (predicted.length === 0) return 0;
  let [low, high] = [-4, 4];
  for (let step = 0; step < 40; step++) {
    const middle = (low + high) / 2;
    const sum = predicted.reduce((total, logit) => total + 1 / (1 + Math.exp(-logit - middle)), 0);
    if (sum < measured) low = middle;
    else high = middle;
  }
  return (((low + high) / 2) * predicted.length) / (predicted.length + SHIFT_PRIOR);
}

const SHIFT_PRIOR = 15;
