/**
 * `npm run bench:consensus [-- --seeds 8] [-- --images 12] [-- --only variants,hostile,calibration,adaptive,outlines,speed]`
 * `npm run bench:consensus -- --fit` fits the weights of lib/consensus/predict.ts, on seeds of its own.
 *
 * Simulated annotators on synthetic, hard and real scenes; every figure is measured here. Variants are compared
 * paired: the same scenes, people and drawings for each, on seeds that no constant was tuned on.
 */
import { existsSync } from "node:fs";
import { setFlagsFromString } from "node:v8";
import { runInNewContext } from "node:vm";
import { mergeImage } from "@/lib/consensus/mergeImage";
import { estimateReliability, ReliabilityBatch, type Gold } from "@/lib/consensus/reliability";
import { regionIou, spansOf } from "@/lib/consensus/spans";
import {
  DEFAULT_SETTINGS,
  type ConsensusSettings,
  type ImageLabels,
  type LabelledInstance,
  type Reliability,
} from "@/lib/consensus/types";
import type { Point } from "@/lib/geometry/types";
import { adaptiveRun } from "./support/adaptive";
import { batchOf, REAL_FILE, type Batch, type SceneKind } from "./support/batches";
import { POOLS } from "./support/crowd";
import { IOU_MODEL } from "@/lib/consensus/predict";
import { fitPredictedIou } from "./support/fit";
import { Tally } from "./support/measures";
import { majorityIou, outlineTasks, tuneNoise } from "./support/outlines";
import { realScenes, type Scene } from "./support/scenes";

const argument = (name: string, otherwise: string) => {
  const at = process.argv.indexOf(`--${name}`);
  return at >= 0 ? (process.argv[at + 1] ?? otherwise) : otherwise;
};
const SEEDS = Array.from({ length: Number(argument("seeds", "8")) }, (_, k) => 9001 + k);
/** Images a seed. */
const IMAGES = Number(argument("images", "12"));
const ONLY = process.argv.includes("--fit")
  ? ["fit"]
  : argument("only", "variants,hostile,calibration,adaptive,outlines,speed").split(",");
const KINDS: SceneKind[] = existsSync(REAL_FILE) ? ["synthetic", "hard", "real"] : ["synthetic", "hard"];
if (KINDS.length === 2) console.log(`Outlines of photographs are left out: ${REAL_FILE} is not there.`);

const PLAIN: Partial<ConsensusSettings> = {
  iouCut: 0.4,
  fusion: "majority",
  votes: "majority",
  explain: false,
};
type Variant = { name: string; settings: Partial<ConsensusSettings>; blind?: boolean };
const VARIANTS: Variant[] = [
  { name: "default", settings: {} },
  { name: "plain", settings: PLAIN, blind: true },
  { name: "suppression", settings: { method: "suppression" } },
  { name: "single linkage", settings: { method: "single", iouCut: 0.4 } },
  { name: "mean shift", settings: { method: "mean-shift" } },
  { name: "HDBSCAN", settings: { method: "hdbscan" } },
  { name: "facility location", settings: { method: "facility" } },
  { name: "STAPLE outlines", settings: { fusion: "staple" } },
  { name: "medoid outlines", settings: { fusion: "medoid" } },
  { name: "majority outlines", settings: { fusion: "majority" } },
  { name: "weighted votes", settings: { votes: "weighted" } },
  { name: "majority votes", settings: { votes: "majority" } },
  { name: "nothing explained", settings: { explain: false } },
];

const f3 = (value: number) => value.toFixed(3);
const mean = (values: readonly number[]) =>
  values.reduce((sum, value) => sum + value, 0) / Math.max(1, values.length);

type Row = { tally: Tally; pqs: number[]; precisions: number[]; cpuMs: number };

function runVariants(
  kind: SceneKind,
  annotators: number,
  mix?: (typeof POOLS)["usual"],
  variants = VARIANTS,
): Map<string, Row> {
  const rows = new Map<string, Row>(
    variants.map(({ name }) => [name, { tally: new Tally(), pqs: [], precisions: [], cpuMs: 0 }]),
  );
  for (const seed of SEEDS) {
    const { scenes, labels } = batchOf(kind, seed, annotators, { images: IMAGES, ...(mix ? { mix } : {}) });
    // Variants that group alike share the estimate of the batch; each is charged its cost.
    const estimates = new Map<string, { reliability: Reliability; costUs: number }>();
    const estimateFor = (settings: Partial<ConsensusSettings>) => {
      const { method, iouCut, explain } = { ...DEFAULT_SETTINGS, ...settings };
      const key = JSON.stringify([method, iouCut, explain]);
      const known = estimates.get(key);
      if (known) return known;
      const fromUs = process.cpuUsage().user;
      const reliability = estimateReliability(labels, { settings });
      const made = { reliability, costUs: process.cpuUsage().user - fromUs };
      estimates.set(key, made);
      return made;
    };
    for (const { name, settings, blind } of variants) {
      const row = rows.get(name)!;
      const own = new Tally();
      const estimate = blind ? undefined : estimateFor(settings);
      const reliability = estimate?.reliability;
      const startUs = process.cpuUsage().user - (estimate?.costUs ?? 0);
      const merged = labels.map((image) => mergeImage(image, settings, reliability).agreed);
      row.cpuMs += (process.cpuUsage().user - startUs) / 1000 / labels.length / SEEDS.length;
      merged.forEach((agreed, k) => {
        own.add(scenes[k]!, agreed);
        row.tally.add(scenes[k]!, agreed);
      });
      row.pqs.push(own.pq);
      row.precisions.push(own.precision);
    }
  }
  return rows;
}

function printRows(rows: Map<string, Row>): void {
  const base = rows.get("default")!;
  console.log(
    "  variant             PQ     default gains (least..most of seeds)   F1@.5  F1@.75 prec.  recall class  mask   bound. CPU ms",
  );
  for (const [name, { tally, pqs, cpuMs }] of rows) {
    const gains = pqs.map((pq, k) => base.pqs[k]! - pq);
    const paired =
      name === "default"
        ? ""
        : `${gains.reduce((a, b) => a + b, 0) / gains.length >= 0 ? "+" : ""}${f3(mean(gains))} (${f3(Math.min(...gains))}..${f3(Math.max(...gains))})`;
    console.log(
      `  ${name.padEnd(19)} ${f3(tally.pq)}  ${paired.padEnd(37)} ${[tally.f50, tally.f75, tally.precision, tally.recall, tally.classAccuracy, tally.meanIou, tally.boundaryIou].map(f3).join("  ")}  ${cpuMs.toFixed(1)}`,
    );
  }
}

function variants(): void {
  for (const kind of KINDS) {
    for (const annotators of [3, 5, 7]) {
      console.log(`\n${kind}, ${annotators} annotators, ${SEEDS.length} seeds x ${IMAGES} images`);
      // The alternatives in full at the usual redundancy; at the others, those that matter there.
      const chosen =
        annotators === 5
          ? VARIANTS
          : VARIANTS.filter(({ name }) =>
              ["default", "plain", "suppression", "weighted votes"].includes(name),
            );
      const rows = runVariants(kind, annotators, undefined, chosen);
      printRows(rows);
      const ours = rows.get("default")!;
      const plain = rows.get("plain")!;
      console.log(
        `  precision at ${annotators}: default ${f3(ours.tally.precision)}, plain ${f3(plain.tally.precision)}`,
      );
    }
  }
}

function hostile(): void {
  console.log(
    `\nPool with 7 copiers and 6 spammers of 30, synthetic, 5 annotators (goal: at least +0.050 over plain)`,
  );
  printRows(
    runVariants(
      "synthetic",
      5,
      POOLS.hostile,
      VARIANTS.filter(({ name }) => ["default", "plain", "majority votes", "weighted votes"].includes(name)),
    ),
  );
}

/** Truth of every tenth image, as a requester's own gold tasks would give it. */
function goldOf(scenes: readonly Scene[]): Gold {
  const gold = new Map<number, LabelledInstance[]>();
  scenes.forEach(({ objects }, k) => {
    if (k % 10 !== 0) return;
    gold.set(
      k,
      objects.map(({ classId, rings }, id): LabelledInstance => ({
        id: String(id),
        classId,
        shape: { kind: "polygon", rings },
      })),
    );
  });
  return gold;
}

function calibration(): void {
  console.log(
    `\nPredicted against true IoU of agreed instances, and predicted against true quality of images (goal: within 0.03)`,
  );
  const bins = [new Map<number, Calibration>(), new Map<number, Calibration>()];
  for (const kind of KINDS) {
    for (const annotators of [3, 5]) {
      const sums = [newCalibration(), newCalibration()];
      for (const seed of SEEDS) {
        const { scenes, labels } = batchOf(kind, seed, annotators, { images: IMAGES });
        for (const withGold of [0, 1]) {
          const reliability = estimateReliability(labels, withGold ? { gold: goldOf(scenes) } : {});
          labels.forEach((image, k) => {
            if (withGold && k % 10 === 0) return;
            calibrate(scenes[k]!, image, reliability, sums[withGold]!, bins[withGold]!);
          });
        }
      }
      sums.forEach((sum, withGold) =>
        console.log(
          `  ${withGold ? "gold 10 %" : "no gold  "} ${kind.padEnd(9)} ${annotators}: IoU predicted ${f3(sum.predicted / sum.count)} true ${f3(sum.actual / sum.count)} (off by ${f3(Math.abs(sum.predicted - sum.actual) / sum.count)})` +
            ` | quality predicted ${f3(sum.quality / sum.images)} true ${f3(sum.pq / sum.images)} (off by ${f3(Math.abs(sum.quality - sum.pq) / sum.images)}), in the 95 % interval ${f3(sum.inside / sum.images)}`,
        ),
      );
    }
  }
  bins.forEach((own, withGold) => {
    console.log(`  ${withGold ? "gold 10 %" : "no gold"}, by predicted IoU`);
    for (const [bin, { predicted, actual, count }] of [...own].sort(([a], [b]) => a - b)) {
      console.log(
        `    predicted ${(bin / 10).toFixed(1)}..: ${f3(predicted / count)} true ${f3(actual / count)} (${count})`,
      );
    }
  });
}

type Calibration = ReturnType<typeof newCalibration>;

function newCalibration() {
  return { predicted: 0, actual: 0, count: 0, quality: 0, pq: 0, inside: 0, images: 0 };
}

function calibrate(
  scene: Scene,
  image: ImageLabels,
  reliability: Reliability,
  sums: Calibration,
  bins: Map<number, Calibration>,
): void {
  const { agreed, predictedQuality } = mergeImage(image, {}, reliability);
  const truth = scene.objects.map(({ rings }) => spansOf({ kind: "polygon", rings }));
  for (const { shape, predictedIou } of agreed) {
    const spans = spansOf(shape);
    const best = Math.max(0, ...truth.map((object) => regionIou(spans, object)));
    if (best <= 0.3) continue;
    const bin = Math.floor(predictedIou * 10);
    const entry = bins.get(bin) ?? newCalibration();
    bins.set(bin, entry);
    for (const sum of [sums, entry]) {
      sum.predicted += predictedIou;
      sum.actual += best;
      sum.count++;
    }
  }
  const { tp, fp, fn, iou } = new Tally().add(scene, agreed);
  const pq = tp + fp + fn === 0 ? 1 : iou / (tp + (fp + fn) / 2);
  sums.quality += predictedQuality.value;
  sums.pq += pq;
  sums.images++;
  if (pq >= predictedQuality.low && pq <= predictedQuality.high) sums.inside++;
}

function adaptive(): void {
  console.log(
    `\nAdaptive redundancy: labels asked for until the predicted quality reaches a target (goal: 65 % fewer than 5 at no more error)`,
  );
  for (const kind of KINDS) adaptiveRun(kind, SEEDS.slice(0, 1));
}

function outlines(): void {
  if (KINDS.length === 2) return;
  console.log(
    `\nCrowd outlines of single objects of the photographs (goal: majority of 9 at 0.839; ours at least 0.880 with 9, 0.861 with 3)`,
  );
  const scenes = realScenes(REAL_FILE);
  const seeds = SEEDS.slice(0, 2);
  const noise = tuneNoise(scenes, seeds, 9, 0.839);
  console.log(`  noise x${noise.toFixed(2)} gives 0.839 for the majority of 9 over these seeds`);
  const results = new Map<number, { majority: number[]; ours: number[]; gold: number[]; best: number[] }>();
  for (const seed of seeds) {
    const tasks = outlineTasks(scenes, seed, 9, noise);
    const truth = tasks.map(({ object }) => spansOf({ kind: "polygon", rings: object.rings }));
    const history = estimateReliability(tasks.map(({ labels }) => labels));
    for (const people of [9, 5, 3]) {
      const labels = tasks.map(({ labels: all }): ImageLabels => ({
        ...all,
        annotators: all.annotators.slice(0, people),
      }));
      const iouOf = (reliability: Reliability) =>
        mean(
          labels.map((image, k) => {
            const { agreed } = mergeImage(image, { existenceCut: 0 }, reliability);
            return Math.max(0, ...agreed.map(({ shape }) => regionIou(spansOf(shape), truth[k]!)));
          }),
        );
      const entry = results.get(people) ?? { majority: [], ours: [], gold: [], best: [] };
      entry.majority.push(mean(tasks.map((task) => majorityIou(task, people))));
      entry.ours.push(iouOf(estimateReliability(labels)));
      entry.gold.push(iouOf(history));
      entry.best.push(
        mean(
          labels.map(({ annotators }, k) =>
            Math.max(
              ...annotators.map(({ instances }) => regionIou(spansOf(instances[0]!.shape), truth[k]!)),
            ),
          ),
        ),
      );
      results.set(people, entry);
    }
  }
  for (const [people, { majority, ours, gold, best }] of results) {
    console.log(
      `  ${people} people: majority ${f3(mean(majority))}, ours ${f3(mean(ours))}, ours with what 9 an object told of them ${f3(mean(gold))}; the best single drawing, picked by the truth, ${f3(mean(best))}`,
    );
  }
}

/** Scenes that are simulated; a larger batch takes them again, each time shifted and with other ids. */
const SCALE_SCENES = 250;
const SCALE_SIZES = argument("sizes", "2500,5000,10000").split(",").map(Number);

function speed(): void {
  console.log(
    `\nSpeed: 5 annotators, on one core: every image grouped, the batch's annotators estimated, every image merged and its labels dropped (goal: 10,000 images x 5 x 7.7 in 60 s, memory flat)`,
  );
  const { labels }: Batch = batchOf("synthetic", 9001, 5, { images: SCALE_SCENES });
  const instances = labels.reduce(
    (sum, { annotators }) => sum + annotators.reduce((all, { instances: own }) => all + own.length, 0),
    0,
  );
  const perAnnotator = instances / labels.length / 5;
  for (const size of SCALE_SIZES) {
    collect();
    const emptyBytes = process.memoryUsage().heapUsed;
    const peak = { heap: 0, rss: 0 };
    const look = () => {
      const { heapUsed, rss } = process.memoryUsage();
      peak.heap = Math.max(peak.heap, heapUsed);
      peak.rss = Math.max(peak.rss, rss);
    };
    let cpuUs = 0;
    const timed = <Value>(run: () => Value): Value => {
      const startUs = process.cpuUsage().user;
      const value = run();
      cpuUs += process.cpuUsage().user - startUs;
      return value;
    };
    const batch = new ReliabilityBatch();
    for (let k = 0; k < size; k++) {
      const image = shifted(labels[k % SCALE_SCENES]!, Math.floor(k / SCALE_SCENES));
      timed(() => batch.put(String(k), image));
      if (k % 250 === 0) look();
    }
    const groupedUs = cpuUs;
    collect();
    const heldBytes = process.memoryUsage().heapUsed;
    const reliability = timed(() => batch.estimate());
    look();
    const estimatedUs = cpuUs;
    let agreed = 0;
    for (let k = 0; k < size; k++) {
      const image = shifted(labels[k % SCALE_SCENES]!, Math.floor(k / SCALE_SCENES));
      agreed += timed(() => mergeImage(image, {}, reliability)).agreed.length;
      if (k % 250 === 0) look();
    }
    const seconds = (us: number) => (us / 1e6).toFixed(1);
    console.log(
      `  ${size} images x 5 x ${perAnnotator.toFixed(1)}: ${seconds(cpuUs)} s (group ${seconds(groupedUs)}, estimate ${seconds(estimatedUs - groupedUs)}, merge ${seconds(cpuUs - estimatedUs)}), ${((cpuUs / 1e6) * (7.7 / perAnnotator)).toFixed(1)} s at 7.7 an annotator; ${agreed} agreed; peak heap ${(peak.heap / 1e6).toFixed(0)} MB, rss ${(peak.rss / 1e6).toFixed(0)} MB; kept of the batch ${((heldBytes - emptyBytes) / 1e6).toFixed(1)} MB`,
    );
  }
}

/** Collects all garbage, so that what is held can be told from what was not yet collected. */
function collect(): void {
  setFlagsFromString("--expose-gc");
  const gc: unknown = runInNewContext("gc");
  if (typeof gc === "function") gc();
}

/** The same labels moved by a part of a pixel, as objects of their own. */
function shifted(image: ImageLabels, round: number): ImageLabels {
  const dx = (round % 7) / 7;
  const dy = Math.floor(round / 7) / 7;
  return {
    ...image,
    annotators: image.annotators.map(({ annotatorId, instances }) => ({
      annotatorId,
      instances: instances.map((instance): LabelledInstance => ({
        ...instance,
        shape:
          instance.shape.kind === "box"
            ? {
                kind: "box",
                box: [
                  instance.shape.box[0] + dx,
                  instance.shape.box[1] + dy,
                  instance.shape.box[2],
                  instance.shape.box[3],
                ],
              }
            : {
                kind: "polygon",
                rings: instance.shape.rings.map((ring) => ring.map(([x, y]): Point => [x + dx, y + dy])),
              },
      })),
    })),
  };
}

/** Fits the predicted IoU on seeds that no figure is measured on, and prints the weights beside the committed ones. */
function fit(): void {
  const seeds = [501, 502, 503, 504];
  console.log(
    `\nWeights of the predicted IoU (lib/consensus/predict.ts), fitted on seeds ${seeds.join(", ")}`,
  );
  const fitted = fitPredictedIou(KINDS, seeds);
  for (const [name, value] of Object.entries(fitted.weights))
    console.log(`  ${name}: ${value.toFixed(4)} (committed ${IOU_MODEL[name as keyof typeof IOU_MODEL]})`);
  console.log(`  ${fitted.count} objects; mean absolute error of one ${f3(fitted.error)}`);
}

const PARTS = { variants, hostile, calibration, adaptive, outlines, speed, fit };
const startMs = performance.now();
for (const [name, run] of Object.entries(PARTS)) {
  if (!ONLY.includes(name)) continue;
  run();
  console.log(`(${name} done after ${((performance.now() - startMs) / 1000).toFixed(0)} s)`);
}
