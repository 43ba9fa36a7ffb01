import { HDBSCAN } from "hdbscan-ts";
import { describe, expect, it } from "vitest";
import { hdbscan, meanShift, singleLinkage } from "@/lib/cluster/cluster";
import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";
import { decodeBox, encodeBox, type Offsets } from "@/lib/proposals/boxCoding";
import { suppress } from "@/lib/proposals/suppress";
import { seeded } from "@/lib/vision/ranker";
import { golden } from "@/tests/support/golden";

type Corners = [number, number, number, number];
const toBox = ([left, top, right, bottom]: Corners): Box => [left, top, right - left, bottom - top];
const sameGroups = (a: ArrayLike<number>, b: ArrayLike<number>) =>
  Array.from(a).every((label, i) =>
    Array.from(a).every(
      (other, j) => (label >= 0 && label === other) === (b[i]! >= 0 && b[i] === b[j]) || i === j,
    ),
  );

const suppression = golden<{
  boxes: Corners[];
  scores: number[];
  classes: number[];
  nms: Record<string, number[]>;
  batched_nms: Record<string, number[]>;
  box_iou_first12: number[][];
}>("proposals", "nms_boxes");

describe.skipIf(suppression.cases.length === 0)("suppression as in torchvision 0.14", () => {
  it.each(suppression.cases.map((entry, n) => [n, entry] as const))(
    "keeps the same boxes in the same order, case %i",
    (_, entry) => {
      const boxes = entry.boxes.map(toBox);
      for (const [iouMax, kept] of Object.entries(entry.nms)) {
        expect(suppress(boxes, entry.scores, Number(iouMax))).toEqual(kept);
      }
      for (const [iouMax, kept] of Object.entries(entry.batched_nms)) {
        const perClass = [...new Set(entry.classes)].flatMap((name) => {
          const own = boxes.flatMap((__, n) => (entry.classes[n] === name ? [n] : []));
          return suppress(
            own.map((n) => boxes[n]!),
            own.map((n) => entry.scores[n]!),
            Number(iouMax),
          ).map((n) => own[n]!);
        });
        expect(perClass.sort((a, b) => entry.scores[b]! - entry.scores[a]!)).toEqual(kept);
      }
      entry.box_iou_first12.forEach((row, i) =>
        row.forEach((iou, j) => expect(boxIou(boxes[i]!, boxes[j]!)).toBeCloseTo(iou, 9)),
      );
    },
  );
});

const coding = golden<{ priors: Corners[]; boxes: Corners[]; encoded: number[][]; decoded: Corners[] }>(
  "proposals",
  "ssd_box_coding",
);

describe.skipIf(coding.cases.length === 0)("box coding of SSD as in torchvision 0.14", () => {
  it.each(coding.cases.map((entry, n) => [n, entry] as const))(
    "encodes and decodes alike, case %i",
    (_, { priors, boxes, encoded, decoded }) => {
      priors.forEach((corners, n) => {
        const prior = toBox(corners);
        const code = encodeBox(toBox(boxes[n]!), prior);
        code.forEach((value, axis) => expect(value).toBeCloseTo(encoded[n]![axis]!, 6));
        const [x, y, w, h] = decodeBox(encoded[n] as unknown as Offsets, prior);
        [x, y, x + w, y + h].forEach((value, axis) => expect(value).toBeCloseTo(decoded[n]![axis]!, 5));
      });
    },
  );
});

const shift = golden<{
  points: number[][];
  bandwidth: number;
  meanshift_centers: number[][];
  meanshift_labels: number[];
}>("consensus", "meanshift_dbscan");

describe.skipIf(shift.cases.length === 0)("mean shift as in scikit-learn 1.2", () => {
  it.each(shift.cases.map((entry, n) => [n, entry] as const))(
    "finds the same centres and groups, case %i",
    (_, entry) => {
      const { centers, labels } = meanShift(entry.points, entry.bandwidth);
      expect(centers).toHaveLength(entry.meanshift_centers.length);
      for (const center of entry.meanshift_centers) {
        const nearest = Math.min(
          ...centers.map((own) => Math.hypot(...own.map((value, d) => value - center[d]!))),
        );
        expect(nearest).toBeLessThan(0.01 * entry.bandwidth);
      }
      expect(sameGroups(labels, entry.meanshift_labels)).toBe(true);
    },
  );
});

type LinkageCase = { distance: number[]; n: number; single: { labels: Record<string, number[]> } };
const linkage = golden<LinkageCase>("consensus", "linkage");

describe.skipIf(linkage.cases.length === 0)("single linkage as in scipy 1.10", () => {
  it.each(linkage.cases.map((entry, n) => [n, entry] as const))(
    "cuts into the same groups, case %i",
    (_, { distance, n, single }) => {
      const at = (i: number, j: number): number =>
        i === j ? 0 : i > j ? at(j, i) : distance[n * i - (i * (i + 1)) / 2 + j - i - 1]!;
      for (const [height, labels] of Object.entries(single.labels)) {
        expect(sameGroups(singleLinkage(n, at, Number(height)), labels)).toBe(true);
      }
    },
  );
});

describe("HDBSCAN beside an independent implementation (hdbscan-ts)", () => {
  it.each([1, 2, 3, 4, 5])("groups well-separated clouds alike, seed %i", (seed) => {
    const random = seeded(seed);
    const points = [0, 1, 2].flatMap((cloud) =>
      Array.from({ length: 14 }, () => [cloud * 10 + random() * 2, (cloud % 2) * 10 + random() * 2]),
    );
    const distance = (i: number, j: number) =>
      Math.hypot(points[i]![0]! - points[j]![0]!, points[i]![1]! - points[j]![1]!);
    const own = hdbscan(points.length, distance, { clusterSizeMin: 5 });
    const other = new HDBSCAN({ minClusterSize: 5, minSamples: 5 }).fit(points);
    expect(new Set(own.filter((label) => label >= 0)).size).toBe(3);
    // That implementation leaves more items at the rim of a cloud out as noise; where both give a group, it is the same.
    const both = [...own].flatMap((label, n) => (label >= 0 && other[n]! >= 0 ? [n] : []));
    expect(new Set(other.filter((label) => label >= 0)).size).toBe(3);
    expect(both.length).toBeGreaterThan(20);
    expect(
      sameGroups(
        both.map((n) => own[n]!),
        both.map((n) => other[n]!),
      ),
    ).toBe(true);
  });
});
