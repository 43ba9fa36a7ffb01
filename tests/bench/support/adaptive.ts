import { mergeImage } from "@/lib/consensus/mergeImage";
import { estimateReliability, ReliabilityBatch } from "@/lib/consensus/reliability";
import type { ConsensusSettings, ImageLabels } from "@/lib/consensus/types";
import { batchOf, type SceneKind } from "./batches";
import { Tally } from "./measures";

const PLAIN: Partial<ConsensusSettings> = {
  iouCut: 0.4,
  fusion: "majority",
  votes: "majority",
  explain: false,
};
const KMAX = 7;
const TARGETS = [0.72, 0.78, 0.82, 0.85];

/**
 * Prints, per target, the labels an image used and the quality reached, beside fixed 5. People come in
 * random order, whoever they are; each round the reliability is estimated anew from what there is.
 */
export function adaptiveRun(kind: SceneKind, seeds: readonly number[]): void {
  const rows = new Map<string, { labels: number; images: number; tally: Tally }>();
  const row = (name: string) => {
    const entry = rows.get(name) ?? { labels: 0, images: 0, tally: new Tally() };
    rows.set(name, entry);
    return entry;
  };
  for (const seed of seeds) {
    const { scenes, labels } = batchOf(kind, seed, 12, { images: 40 });
    const first = (k: number, count: number): ImageLabels => ({
      ...labels[k]!,
      annotators: labels[k]!.annotators.slice(0, count),
    });
    const five = labels.map((_, k) => first(k, 5));
    const known = estimateReliability(five);
    five.forEach((image, k) => {
      row("fixed 5, plain").tally.add(scenes[k]!, mergeImage(image, PLAIN).agreed);
      row("fixed 5, default").tally.add(scenes[k]!, mergeImage(image, {}, known).agreed);
    });
    for (const name of ["fixed 5, plain", "fixed 5, default"]) {
      row(name).labels += 5 * labels.length;
      row(name).images += labels.length;
    }
    for (const target of TARGETS) {
      const given: ImageLabels[] = labels.map((image) => ({ ...image, annotators: [] }));
      const next = new Int32Array(labels.length);
      const open = new Set(labels.keys());
      const batch = new ReliabilityBatch();
      let reliability = batch.estimate();
      for (let round = 0; round < KMAX && open.size > 0; round++) {
        for (const k of open) {
          const image = labels[k]!;
          const chosen = image.annotators[next[k]!];
          next[k]!++;
          if (!chosen) continue;
          given[k] = { ...given[k]!, annotators: [...given[k]!.annotators, chosen] };
          batch.put(String(k).padStart(4, "0"), given[k]!);
        }
        reliability = batch.estimate();
        for (const k of [...open]) {
          const { predictedQuality } = mergeImage(given[k]!, { kMin: 1 }, reliability);
          if (predictedQuality.value >= target) open.delete(k);
        }
      }
      const entry = row(`target ${target.toFixed(2)}`);
      given.forEach((image, k) => {
        entry.tally.add(scenes[k]!, mergeImage(image, {}, reliability).agreed);
        entry.labels += image.annotators.length;
        entry.images++;
      });
    }
  }
  console.log(`  ${kind}`);
  for (const [name, { labels, images, tally }] of rows) {
    const perImage = labels / images;
    console.log(
      `    ${name.padEnd(30)} ${perImage.toFixed(2)} labels an image (${(100 * (1 - perImage / 5)).toFixed(0)} % fewer), PQ ${tally.pq.toFixed(3)}, F1@.5 ${tally.f50.toFixed(3)}`,
    );
  }
}
