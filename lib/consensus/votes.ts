import type { AnnotatorReliability, Reliability } from "./types";

/** One annotator's table in logarithms, ready for many look-ups. */
type LogTable = { present: Float64Array; inventions: number; inventedClass: Float64Array };

/** Everything needed to weigh votes. `classIds[k]` is class k; index `classIds.length` is "nothing". */
export type VoteModel = {
  readonly classIds: readonly string[];
  readonly classIndex: ReadonlyMap<string, number>;
  readonly logShare: Float64Array;
  tableOf(annotatorId: string): LogTable;
};

/** What is assumed of people about whom nothing is known; measured on simulated pools, so a guess elsewhere. */
const TYPICAL = {
  detection: 0.87,
  rightClass: 0.93,
  realShare: 0.75,
  inventions: 1.1,
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
    prevalence: [...classIds.map(() => TYPICAL.realShare / Math.max(1, count)), 1 - TYPICAL.realShare],
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
    logShare: Float64Array.from(reliability.prevalence, (share) => Math.log(Math.max(share, 1e-12))),
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

/** P(an annotator is among those who drew something that is not there), of `voters` who looked. */
export function inventedRate(inventions: number, voters: number): number {
  return Math.min(0.97, Math.max(0.01, inventions / Math.max(1, voters)));
}

export const TEMPER = { at: 1 };
/** One annotator's say on one candidate: class index, or the number of classes for "nothing". */
export type Say = { table: LogTable; said: number; weight: number };

/**
 * P(class | votes) for every class and, last, for "nothing there", by Bayes' rule under independent
 * annotators. `weight` shares one vote among people who copy each other. `voters` is how many
 * independent people looked. O(says x classes).
 */
export function posteriorOf(model: VoteModel, says: readonly Say[], voters: number): Float64Array {
  const classCount = model.classIds.length;
  const size = classCount + 1;
  const scores = new Float64Array(size);
  for (let t = 0; t < size; t++) scores[t] = model.logShare[t]!;
  for (const { table, said, weight } of says) {
    for (let t = 0; t < classCount; t++) scores[t]! += weight * table.present[t * size + said]!;
    const rate = inventedRate(table.inventions, voters);
    scores[classCount]! +=
      weight * (said === classCount ? Math.log(1 - rate) : Math.log(rate) + table.inventedClass[said]!);
  }
  if (TEMPER.at !== 1)
    for (let t = 0; t < size; t++)
      scores[t] = model.logShare[t]! + TEMPER.at * (scores[t]! - model.logShare[t]!);
  let best = -Infinity;
  for (const score of scores) if (score > best) best = score;
  let sum = 0;
  for (let t = 0; t < size; t++) sum += scores[t] = Math.exp(scores[t]! - best);
  for (let t = 0; t < size; t++) scores[t]! /= sum;
  return scores;
}
