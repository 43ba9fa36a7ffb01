import { describe, expect, it } from "vitest";
import { maskFromRle, rleArea, rleFromString } from "@/lib/geometry/rle";
import { maskDifference, maskArea, maskIntersectionArea, type Mask } from "@/lib/geometry/mask";
import type { Box } from "@/lib/geometry/types";
import { averagePrecision, type EvalImage } from "@/lib/quality/averagePrecision";
import { cocoBoxIou } from "@/lib/quality/cocoIou";
import { meanPanopticQuality, panopticCounts, type PanopticCounts } from "@/lib/quality/panoptic";
import { golden } from "@/tests/support/golden";

type Truth = { image_id: number; category_id: number; bbox: Box; area: number; iscrowd: 0 | 1 };
type Label = { image_id: number; category_id: number; bbox: Box; score: number };
type ApCase = {
  gt: { images: { id: number }[]; annotations: Truth[]; categories: { id: number }[] };
  dt: Label[];
  stats: number[];
};
const precision = golden<ApCase>("quality", "coco_eval_bbox");

describe.skipIf(precision.cases.length === 0)(`average precision against ${precision.header.made}`, () => {
  it.each(precision.cases.map((c, i) => [i, c] as const))("set %i has the twelve figures", (_, c) => {
    const images = c.gt.images.map(({ id }): EvalImage => {
      const truth = c.gt.annotations.filter((a) => a.image_id === id);
      const labels = c.dt.filter((d) => d.image_id === id);
      return {
        truth: truth.map((a) => ({ classId: a.category_id, areaPx2: a.area, isCrowd: a.iscrowd === 1 })),
        labels: labels.map((d) => ({ classId: d.category_id, areaPx2: d.bbox[2] * d.bbox[3], score: d.score })),
        iou: (l, t) => cocoBoxIou(labels[l]!.bbox, truth[t]!.bbox, truth[t]!.iscrowd === 1),
      };
    });
    const { figures } = averagePrecision(
      images,
      c.gt.categories.map(({ id }) => id),
    );
    const { ap, ap50, ap75, apSmall, apMedium, apLarge, ar1, ar10, ar100, arSmall, arMedium, arLarge } = figures;
    const all = [ap, ap50, ap75, apSmall, apMedium, apLarge, ar1, ar10, ar100, arSmall, arMedium, arLarge];
    all.forEach((figure, i) => expect(figure ?? -1).toBeCloseTo(c.stats[i] ?? NaN, 14));
  });
});

type Segment = { id: number; category_id: number; area: number; iscrowd?: 0 | 1 };
type Mean = { pq: number; sq: number; rq: number; n: number } | null;
type PqCase = {
  size: [number, number];
  categories: { id: number; isthing: 0 | 1 }[];
  gt_segments: Segment[];
  gt_rle: Record<string, string>;
  pred_segments: Segment[];
  pred_rle: Record<string, string>;
  per_category: Record<string, { tp: number; fp: number; fn: number; iou_sum: number }>;
  all: Mean;
  things: Mean;
  stuff: Mean;
};
const panoptic = golden<PqCase>("quality", "panoptic_quality");

describe.skipIf(panoptic.cases.length === 0)(`panoptic quality against ${panoptic.header.made}`, () => {
  it.each(panoptic.cases.map((c, i) => [i, c] as const))("image %i has the counts and means", (_, c) => {
    const [height, width] = c.size;
    const maskOf = (counts: string): Mask => maskFromRle(rleFromString(counts, width, height));
    const areaOf = (counts: string) => rleArea(rleFromString(counts, width, height));
    const truth = c.gt_segments.map((s) => maskOf(c.gt_rle[s.id]!));
    const labels = c.pred_segments.map((s) => maskOf(c.pred_rle[s.id]!));
    const counts = panopticCounts(
      c.gt_segments.map((s) => ({
        classId: s.category_id,
        areaPx: areaOf(c.gt_rle[s.id]!),
        isCrowd: s.iscrowd === 1,
      })),
      c.pred_segments.map((s) => ({ classId: s.category_id, areaPx: areaOf(c.pred_rle[s.id]!) })),
      {
        common: (l, t) => maskIntersectionArea(labels[l]!, truth[t]!),
        undecided: (l) => maskArea(truth.reduce(maskDifference, labels[l]!)),
      },
    );
    for (const [id, expected] of Object.entries(c.per_category)) {
      const found = counts.get(Number(id));
      expect(found?.truePositives ?? 0).toBe(expected.tp);
      expect(found?.falsePositives ?? 0).toBe(expected.fp);
      expect(found?.falseNegatives ?? 0).toBe(expected.fn);
      expect(found?.iouSum ?? 0).toBeCloseTo(expected.iou_sum, 12);
    }
    const meanOver = (isWanted: (category: { isthing: 0 | 1 }) => boolean) =>
      meanPanopticQuality(c.categories.filter(isWanted).flatMap(({ id }): PanopticCounts[] => (counts.has(id) ? [counts.get(id)!] : [])));
    const means = [
      [meanOver(() => true), c.all],
      [meanOver(({ isthing }) => isthing === 1), c.things],
      [meanOver(({ isthing }) => isthing === 0), c.stuff],
    ] as const;
    for (const [found, expected] of means) {
      expect(found?.pq ?? 0).toBeCloseTo(expected?.pq ?? 0, 12);
      expect(found?.sq ?? 0).toBeCloseTo(expected?.sq ?? 0, 12);
      expect(found?.rq ?? 0).toBeCloseTo(expected?.rq ?? 0, 12);
    }
  });
});
