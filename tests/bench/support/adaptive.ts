import { mergeImage } from "@/lib/consensus/mergeImage";
import { expectedGain, invitedFrom } from "@/lib/consensus/redundancy";
import { ReliabilityBatch } from "@/lib/consensus/reliability";
import type { ConsensusSettings, ImageLabels } from "@/lib/consensus/types";
import { batchOf, type SceneKind } from "./batches";
import { Tally } from "./measures";
import type { Scene } from "./scenes";

const PLAIN: Partial<ConsensusSettings> = {
  iouCut: 0.4,
  fusion: "majority",
  votes: "majority",
  explain: false,
};
/** Share of the pool, from the most reliable, that is asked. */
const SHARES = [1, 0.3, 0.2];
/** One more label is asked for while it is expected to add this much quality. */
const GAINS = [0.02, 0.03, 0.04];
const KMAX = 6;
/** As many as there are photographs. */
const IMAGES = 51;

type Row = { labels: number; images: number; turnedAway: number; tally: Tally };
type Test = { scenes: readonly Scene[]; labels: readonly ImageLabels[]; historyCount: number };

/**
 * Prints labels an image and quality reached beside a fixed five. A first part of the batch is labelled by five people
 * each in every case, so everybody is known a little; the figures are of the rest. People arrive in random
 * order; the rule turns away whoever is not among the most reliable, and stops where one more label is not worth it.
 */
export function adaptiveRun(kind: SceneKind, seeds: readonly number[]): void {
  const rows = new Map<string, Row>();
  const row = (name: string): Row => {
    const entry = rows.get(name) ?? { labels: 0, images: 0, turnedAway: 0, tally: new Tally() };
    rows.set(name, entry);
    return entry;
  };
  for (const seed of seeds) {
    const test: Test = {
      ...batchOf(kind, seed, 12, { images: IMAGES }),
      historyCount: Math.floor(IMAGES / 3),
    };
    fixedFive(test, row("fixed 5, plain"), row("fixed 5, default"));
    for (const share of SHARES)
      for (const gain of GAINS) adaptive(test, share, gain, row(`best ${100 * share} %, gain ${gain}`));
  }
  console.log(`  ${kind}`);
  for (const [name, { labels, images: count, turnedAway, tally }] of rows) {
    const perImage = labels / count;
    console.log(
      `    ${name.padEnd(22)} ${perImage.toFixed(2)} labels an image (${(100 * (1 - perImage / 5)).toFixed(0)} % fewer), PQ ${tally.pq.toFixed(3)}, F1@.5 ${tally.f50.toFixed(3)}, turned away ${(turnedAway / count).toFixed(1)}`,
    );
  }
  for (const base of ["fixed 5, plain", "fixed 5, default"]) {
    const wanted = row(base).tally.pq;
    const best = [...rows]
      .filter(([name, entry]) => name.startsWith("best") && entry.tally.pq >= wanted)
      .sort(([, a], [, b]) => a.labels / a.images - b.labels / b.images)[0];
    const answer = best
      ? `${(100 * (1 - best[1].labels / best[1].images / 5)).toFixed(0)} % fewer labels (${best[0]})`
      : "no rule reaches it";
    console.log(`    at no more error than ${base}: ${answer}`);
  }
}

function first(image: ImageLabels, count: number): ImageLabels {
  return { ...image, annotators: image.annotators.slice(0, count) };
}

const keyOf = (k: number) => String(k).padStart(4, "0");

function history({ labels, historyCount }: Test): ReliabilityBatch {
  const batch = new ReliabilityBatch();
  for (let k = 0; k < historyCount; k++) batch.put(keyOf(k), first(labels[k]!, 5));
  return batch;
}

function fixedFive(test: Test, plain: Row, ours: Row): void {
  const batch = history(test);
  const rest = test.labels.map((_, k) => k).slice(test.historyCount);
  for (const k of rest) batch.put(keyOf(k), first(test.labels[k]!, 5));
  const reliability = batch.estimate();
  for (const k of rest) {
    const five = first(test.labels[k]!, 5);
    plain.tally.add(test.scenes[k]!, mergeImage(five, PLAIN).agreed);
    ours.tally.add(test.scenes[k]!, mergeImage(five, {}, reliability).agreed);
  }
  for (const entry of [plain, ours]) {
    entry.labels += 5 * rest.length;
    entry.images += rest.length;
  }
}

function adaptive(test: Test, share: number, gainMin: number, entry: Row): void {
  const batch = history(test);
  let reliability = batch.estimate();
  const given = test.labels.map((image) => first(image, 0));
  const next = new Int32Array(test.labels.length);
  const open = new Set(test.labels.map((_, k) => k).slice(test.historyCount));
  for (let round = 0; round < KMAX && open.size > 0; round++) {
    const isInvited = invitedFrom(reliability, share);
    for (const k of [...open]) {
      const arriving = test.labels[k]!.annotators;
      while (next[k]! < arriving.length && !isInvited(arriving[next[k]!]!.annotatorId)) {
        next[k]!++;
        entry.turnedAway++;
      }
      const chosen = arriving[next[k]!++];
      if (!chosen) {
        open.delete(k);
        continue;
      }
      given[k] = { ...given[k]!, annotators: [...given[k]!.annotators, chosen] };
      batch.put(keyOf(k), given[k]);
    }
    reliability = batch.estimate();
    for (const k of [...open])
      if (expectedGain(mergeImage(given[k]!, { kMin: 1 }, reliability)) < gainMin) open.delete(k);
  }
  for (let k = test.historyCount; k < given.length; k++) {
    entry.tally.add(test.scenes[k]!, mergeImage(given[k]!, {}, reliability).agreed);
    entry.labels += given[k]!.annotators.length;
    entry.images++;
  }
}
