import type { AnnotatorReliability, Reliability } from "./types";

/** One annotator's table in logarithms, ready for many look-ups. */
type LogTable = { present: Float64Array; inventions: number; inventedClass: Float64Array };

/** Everything needed to weigh votes. `classIds[k]` is class k; index `classIds.length` is "nothing". */
export type VoteModel = {
  readonly classIds: readonly string[];
  readonly classIndex: ReadonlyMap<string, number>;
  readonly logObjects: Float64Array;
  readonly logCoincidence: number;
  readonly typicalInventions: number;
  tableOf(annotatorId: string): LogTable;
};

/** What is assumed of people about whom nothing is known; measured on simulated pools, so a guess elsewhere. */
const TYPICAL = {
  detection: 0.87,
  rightClass: 0.93,
  objectsPerImage: 6,
  inventions: 0.5,
  coincidence: 0.05,
  quality: 0.72,
  outlineLoss: 0.2,
};

/** The reliability of a batch about which nothing is known yet. */
export function typicalReliability(classIds: readonly string[]): Reliability {
  const count = classIds.length;
  const confusion = typicalConfusion(count);
  const unknown = { value: TYPICAL.detection, low: 0, high: 1 };
  return {
    classIds: [...classIds],
    objectsPerImage: classIds.map(() => TYPICAL.objectsPerImage / Math.max(1, count)),
    coincidence: TYPICAL.coincidence,
    annotators: {},
    typical: {
      annotatorId: "",
      images: 0,
      instances: 0,
      detection: unknown,
      falseAlarm: { value: 0.1, low: 0, high: 1 },
      confusion,
      inventions: TYPICAL.inventions,
      outlineWeight: 1,
      outlineLoss: TYPICAL.outlineLoss,
      quality: TYPICAL.quality,
      goldImages: 0,
      copyOf: null,
    },
    copies: [],
    iouShift: 0,
    iterations: 0,
    converged: true,
  };
}

export function typicalConfusion(classCount: number): number[][] {
  const { detection, rightClass } = TYPICAL;
  const rows: number[][] = [];
  for (let t = 0; t < classCount; t++) {
    const row = new Array<number>(classCount + 1).fill(
      (detection * (1 - rightClass)) / Math.max(1, classCount - 1),
    );
    row[t] = classCount === 1 ? detection : detection * rightClass;
    row[classCount] = 1 - detection;
    rows.push(row);
  }
  const invented = 0.25;
  rows.push([...new Array<number>(classCount).fill(invented / Math.max(1, classCount)), 1 - invented]);
  return rows;
}

const modelCache = new WeakMap<Reliability, VoteModel>();

/** The tables of a reliability in logarithms; kept for as long as the reliability lives. */
export function voteModel(reliability: Reliability): VoteModel {
  const cached = modelCache.get(reliability);
  if (cached) return cached;
  const tables = new Map<string, LogTable>();
  const typical = logTable(reliability.typical);
  for (const [id, annotator] of Object.entries(reliability.annotators)) tables.set(id, logTable(annotator));
  const model: VoteModel = {
    classIds: reliability.classIds,
    classIndex: new Map(reliability.classIds.map((id, k) => [id, k])),
    logObjects: Float64Array.from(reliability.objectsPerImage, (count) => Math.log(Math.max(count, 1e-9))),
    logCoincidence: Math.log(Math.max(reliability.coincidence, 1e-6)),
    typicalInventions: Math.max(1e-3, reliability.typical.inventions),
    tableOf: (annotatorId) => tables.get(annotatorId) ?? typical,
  };
  modelCache.set(reliability, model);
  return model;
}

function logTable({ confusion, inventions }: AnnotatorReliability): LogTable {
  const size = confusion.length;
  const classCount = size - 1;
  const present = new Float64Array(classCount * size);
  for (let t = 0; t < classCount; t++) {
    for (let v = 0; v < size; v++) present[t * size + v] = Math.log(Math.max(confusion[t]![v]!, 1e-9));
  }
  const last = confusion[classCount]!;
  let invented = 0;
  for (let v = 0; v < classCount; v++) invented += last[v]!;
  const inventedClass = Float64Array.from({ length: classCount }, (_, v) =>
    Math.log(invented > 0 ? Math.max(last[v]! / invented, 1e-9) : 1 / classCount),
  );
  return { present, inventions, inventedClass };
}

/** One annotator's say on one candidate: class index, or the number of classes for "nothing". */
export type Say = { table: LogTable; said: number; weight: number };

/**
 * P(class | votes) for every class and, last, for "nothing there", by Bayes' rule under independent
 * annotators. Real objects of class t come up `objectsPerImage[t]` times an image and are seen, missed or misnamed
 * by everybody as their confusion says. False ones come up as often as those who drew them invent, and a
 * second person joins in by `coincidence`; whoever stays silent says nothing about a false object,
 * because most of the image is free of them. `weight` shares one vote among people who copy each other.
 * O(says x classes).
 */
export function posteriorOf(model: VoteModel, says: readonly Say[]): Float64Array {
  const classCount = model.classIds.length;
  const size = classCount + 1;
  const scores = new Float64Array(size);
  for (let t = 0; t < classCount; t++) scores[t] = model.logObjects[t]!;
  let drawn = 0;
  let inventions = 0;
  let named = 0;
  for (const { table, said, weight } of says) {
    for (let t = 0; t < classCount; t++) scores[t]! += weight * table.present[t * size + said]!;
    if (said === classCount) continue;
    drawn += weight;
    inventions += weight * table.inventions;
    named += weight * table.inventedClass[said]!;
  }
  scores[classCount] = logInvented(drawn, inventions, model.logCoincidence, model.typicalInventions) + named;
  let best = -Infinity;
  for (const score of scores) if (score > best) best = score;
  let sum = 0;
  for (let t = 0; t < size; t++) sum += scores[t] = Math.exp(scores[t]! - best);
  for (let t = 0; t < size; t++) scores[t]! /= sum;
  return scores;
}

/**
 * Logarithm of the expected number of false objects an image that just these people would draw. Where nobody
 * among them drew it (the one who did is left out), a typical person's.
 */
export function logInvented(
  drawn: number,
  inventions: number,
  logCoincidence: number,
  typical: number,
): number {
  if (drawn < 1e-9) return Math.log(typical);
  return Math.log(Math.max(inventions, 1e-6)) + Math.max(0, drawn - 1) * logCoincidence;
}
