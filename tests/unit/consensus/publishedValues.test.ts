import { readFileSync } from "node:fs";
import path from "node:path";
import { HDBSCAN } from "hdbscan-ts";
import { describe, expect, it } from "vitest";
import { assign } from "@/lib/consensus/assignment";
import { dawidSkene, type Votes } from "@/lib/consensus/dawidSkene";
import { dbscan, hdbscan, meanShift } from "@/lib/consensus/density";
import { cohenKappa, fleissKappa, krippendorffAlpha } from "@/lib/consensus/kappa";
import { cutLinkage, linkage } from "@/lib/consensus/linkage";
import { staple } from "@/lib/consensus/staple";

/** The expected values and where they come from stand in each file's header. */
function golden<T>(name: string): T[] {
  const file = path.resolve(import.meta.dirname, "../../golden/consensus", `${name}.json`);
  const parsed: { cases: T[] } = JSON.parse(readFileSync(file, "utf8"));
  return parsed.cases;
}

/** Two labellings are one partition when each label of one goes with one label of the other. */
function expectSamePartition(actual: ArrayLike<number>, expected: ArrayLike<number>): void {
  const name = (labels: ArrayLike<number>) => {
    const seen = new Map<number, number>();
    return Array.from(labels, (label) => {
      if (label < 0) return -1;
      if (!seen.has(label)) seen.set(label, seen.size);
      return seen.get(label);
    });
  };
  expect(name(actual)).toEqual(name(expected));
}

type LevelValues = Partial<Record<"nominal" | "ordinal" | "interval" | "ratio", number>>;
type AgreementCase =
  | {
      kind: "krippendorff";
      source: string;
      data: (number | null)[][];
      published?: LevelValues;
      computed: LevelValues;
    }
  | { kind: "fleiss"; source: string; data: number[][]; published?: number; computed: number }
  | {
      kind: "cohen";
      source: string;
      data: number[][];
      published?: number;
      computed: number;
      linear_weighted?: number;
      quadratic_weighted?: number;
    };

describe("agreement beyond chance", () => {
  it.each(golden<AgreementCase>("agreement"))("$kind: $source", (example) => {
    if (example.kind === "krippendorff") {
      for (const level of ["nominal", "ordinal", "interval", "ratio"] as const) {
        const alpha = krippendorffAlpha(example.data, level);
        if (example.computed[level] !== undefined) expect(alpha).toBeCloseTo(example.computed[level], 10);
        if (example.published?.[level] !== undefined) expect(alpha).toBeCloseTo(example.published[level], 3);
      }
      return;
    }
    const kappa = example.kind === "fleiss" ? fleissKappa(example.data) : cohenKappa(example.data);
    expect(kappa).toBeCloseTo(example.computed, 10);
    if (example.published !== undefined) expect(kappa).toBeCloseTo(example.published, 2);
    if (example.kind === "cohen" && example.linear_weighted !== undefined) {
      expect(cohenKappa(example.data, "linear")).toBeCloseTo(example.linear_weighted, 10);
    }
    if (example.kind === "cohen" && example.quadratic_weighted !== undefined) {
      expect(cohenKappa(example.data, "quadratic")).toBeCloseTo(example.quadratic_weighted, 10);
    }
  });

  it("is not a number when no unit was rated twice, and 1 when there is nothing to disagree about", () => {
    expect(
      krippendorffAlpha([
        [1, null],
        [null, 2],
      ]),
    ).toBeNaN();
    expect(
      krippendorffAlpha([
        [1, 1],
        [1, 1],
      ]),
    ).toBe(1);
  });
});

type DawidSkeneCase = {
  name: string;
  ratings_obs1x3_obs2_obs3_obs4_obs5?: number[][];
  labels_item_annotator_class?: [number, number, number][];
  items?: number;
  annotators?: number;
  classes?: number;
  class_marginals: number[];
  error_rates_obs_true_reported: number[][][];
  posterior?: number[][];
  posterior_argmax?: number[];
  posterior_max?: number[];
  loglik: number;
};

describe("Dawid and Skene, 1979", () => {
  it.each(golden<DawidSkeneCase>("dawid_skene"))("$name: shares, error rates and posteriors", (example) => {
    const classCount = example.class_marginals.length;
    const annotatorCount = example.error_rates_obs_true_reported.length;
    const items: Votes[] = example.ratings_obs1x3_obs2_obs3_obs4_obs5
      ? // Observer 1 rated every patient three times.
        example.ratings_obs1x3_obs2_obs3_obs4_obs5.map((row) => ({
          annotators: [0, 0, 0, 1, 2, 3, 4],
          classes: row.map((rating) => rating - 1),
        }))
      : Array.from({ length: example.items ?? 0 }, (_, item) => {
          const votes = (example.labels_item_annotator_class ?? []).filter(([of]) => of === item);
          return {
            annotators: votes.map(([, annotator]) => annotator),
            classes: votes.map(([, , said]) => said),
          };
        });
    const result = dawidSkene(items, annotatorCount, classCount, { toleranceMax: 1e-12 });
    expect(result.converged).toBe(true);
    expect(result.logLikelihood).toBeCloseTo(example.loglik, 4);
    example.class_marginals.forEach((share, c) => expect(result.marginals[c]).toBeCloseTo(share, 4));
    expect(result.errorRates).toHaveLength(annotatorCount * classCount * classCount);
    example.error_rates_obs_true_reported
      .flat(2)
      .forEach((rate, k) => expect(result.errorRates[k]).toBeCloseTo(rate, 4));
    const rows = items.map((_, i) => [...result.posterior.slice(i * classCount, (i + 1) * classCount)]);
    example.posterior?.forEach((row, i) => row.forEach((p, c) => expect(rows[i]?.[c]).toBeCloseTo(p, 4)));
    example.posterior_max?.forEach((p, i) => expect(Math.max(...(rows[i] ?? []))).toBeCloseTo(p, 4));
    example.posterior_argmax?.forEach((c, i) =>
      expect(rows[i]?.indexOf(Math.max(...(rows[i] ?? [])))).toBe(c),
    );
  });
});

type AssignmentCase = {
  cost: number[][];
  min_total: number;
  max_total: number;
  min_rows: number[];
  min_cols: number[];
  unique: boolean;
};

describe("assignment", () => {
  it.each(golden<AssignmentCase>("assignment"))("least and greatest total of case %#", (example) => {
    const total = (columns: Int32Array) =>
      columns.reduce((sum, column, row) => sum + (column < 0 ? 0 : (example.cost[row]?.[column] ?? NaN)), 0);
    const least = assign(example.cost);
    expect(total(least)).toBeCloseTo(example.min_total, 9);
    expect(total(assign(example.cost.map((row) => row.map((cost) => -cost))))).toBeCloseTo(
      example.max_total,
      9,
    );
    if (example.unique) expect(example.min_rows.map((row) => least[row])).toEqual(example.min_cols);
  });
  it("leaves every row over when there is no column", () => {
    expect([...assign([[], []])]).toEqual([-1, -1]);
    expect([...assign([])]).toEqual([]);
  });
});

type LinkageSide = { heights: number[]; labels: Record<string, number[]> };
type LinkageCase = {
  distance: number[];
  n: number;
  single: LinkageSide;
  average: LinkageSide;
  complete: LinkageSide;
};

describe("linkage", () => {
  it.each(golden<LinkageCase>("linkage"))("heights and cuts of case %#", (example) => {
    for (const rule of ["single", "average", "complete"] as const) {
      const merges = linkage(example.distance, example.n, rule);
      expect(merges).toHaveLength(example.n - 1);
      merges.forEach(({ height }, k) => expect(height).toBeCloseTo(example[rule].heights[k] ?? NaN, 8));
      for (const [cut, labels] of Object.entries(example[rule].labels)) {
        expectSamePartition(cutLinkage(merges, example.n, Number(cut)), labels);
      }
    }
  });
});

type DensityCase = {
  points: number[][];
  bandwidth: number;
  meanshift_centers: number[][];
  meanshift_labels: number[];
  dbscan: { eps: number; min_samples: number; labels: number[] };
};

/** Park and Miller's minimal standard generator; 0..1. */
function seededRandom(seed: number): () => number {
  let state = seed;
  return () => (state = (state * 48_271) % 2_147_483_647) / 2_147_483_647;
}

const euclidean = (points: number[][]) => (i: number, j: number) =>
  Math.hypot(...(points[i] ?? []).map((value, d) => value - (points[j]?.[d] ?? NaN)));

describe("density clustering", () => {
  it.each(golden<DensityCase>("meanshift_dbscan"))("mean shift and DBSCAN of case %#", (example) => {
    const { centers, labels } = meanShift(example.points, example.bandwidth);
    expectSamePartition(labels, example.meanshift_labels);
    expect(centers).toHaveLength(example.meanshift_centers.length);
    example.meanshift_centers.forEach((center) => {
      const nearest = Math.min(
        ...centers.map((mine) => Math.hypot(...mine.map((value, d) => value - (center[d] ?? NaN)))),
      );
      expect(nearest).toBeLessThan(1e-6);
    });
    const { eps, min_samples: samplesMin, labels: expected } = example.dbscan;
    const found = dbscan(example.points.length, euclidean(example.points), eps, samplesMin);
    // A border point within reach of two clusters may go to either; the noise is always the same.
    expect([...found].map((label) => label < 0)).toEqual(expected.map((label) => label < 0));
    expectSamePartition(found, expected);
  });

  // hdbscan-ts 1.0.17 squares distances, leaves the point itself out of its neighbours and weighs stability by a
  // cluster's last edge, so the two need to agree only where groups are compact,
  // far apart and too small to be divided again.
  it.each([2, 3, 4, 5])("HDBSCAN finds the same %i compact groups as an independent library", (groups) => {
    for (let seed = 1; seed <= 5; seed++) {
      const random = seededRandom(100 * groups + seed);
      const points = Array.from({ length: 6 * groups }, (_, i) => [
        300 * (i % groups) + 10 * random(),
        200 * ((i % groups) % 2) + 10 * random(),
      ]);
      const other = new HDBSCAN({ minClusterSize: 4, minSamples: 3 });
      other.fit(points);
      const ours = hdbscan(points.length, euclidean(points), { clusterSizeMin: 4, samplesMin: 4 });
      // It also peels single points off a group and calls them noise; compare what it did place.
      const placed = [...other.labels_.keys()].filter((i) => (other.labels_[i] ?? -1) >= 0);
      expectSamePartition(
        placed.map((i) => ours[i] ?? -1),
        placed.map((i) => other.labels_[i] ?? -1),
      );
      expect(placed.length).toBeGreaterThanOrEqual(4 * groups);
      expect(new Set(ours).size).toBe(groups);
    }
  });

  it("HDBSCAN leaves a lone far point as noise and takes one cluster only when allowed", () => {
    const points = [
      [0, 0],
      [1, 0],
      [0, 1],
      [1, 1],
      [100, 100],
      [101, 100],
      [100, 101],
      [101, 101],
      [500, -500],
    ];
    const labels = hdbscan(points.length, euclidean(points), { clusterSizeMin: 3 });
    expect([...labels]).toEqual([0, 0, 0, 0, 1, 1, 1, 1, -1]);
    const four = points.slice(0, 4);
    expect([...hdbscan(4, euclidean(four), { clusterSizeMin: 3 })]).toEqual([-1, -1, -1, -1]);
    expect([...hdbscan(4, euclidean(four), { clusterSizeMin: 3, allowSingle: true })]).toEqual([0, 0, 0, 0]);
  });
});

type StapleCase = {
  decisions: string[];
  prior: number;
  sensitivity: number[];
  specificity: number[];
  W: number[];
};

describe("STAPLE", () => {
  it.each(golden<StapleCase>("staple"))("rates and posterior of case %#", (example) => {
    const masks = example.decisions.map((bits) => Uint8Array.from(bits, Number));
    const result = staple(masks);
    example.sensitivity.forEach((rate, r) => expect(result.sensitivity[r]).toBeCloseTo(rate, 5));
    example.specificity.forEach((rate, r) => expect(result.specificity[r]).toBeCloseTo(rate, 5));
    expect(result.probability).toHaveLength(example.W.length);
    example.W.forEach((p, pixel) => expect(result.probability[pixel]).toBeCloseTo(p, 4));
  });
});
