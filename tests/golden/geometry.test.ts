import { describe, expect, it } from "vitest";
import { boundaryBand, boundaryIou, boundaryThickness } from "@/lib/geometry/boundary";
import { boxIou, boxOfRing } from "@/lib/geometry/box";
import { rleFromCocoPolygon } from "@/lib/geometry/cocoPolygon";
import { convexHull } from "@/lib/geometry/hull";
import { maskArea, maskIntersectionArea, maskIou, maskToBytes } from "@/lib/geometry/mask";
import { pixelToUpright, toStored, uprightSize, type Orientation } from "@/lib/geometry/orientation";
import { prepareRings, regionIou, ringsArea, ringsIntersectionArea, ringsIou } from "@/lib/geometry/region";
import { ringCentroid, ringPerimeter, signedRingArea } from "@/lib/geometry/ring";
import {
  maskFromRle,
  mergeRle,
  prepareRle,
  rleArea,
  rleBounds,
  rleFromBytes,
  rleFromMask,
  rleFromString,
  rleIou,
  rleToBytes,
  rleToString,
  type Rle,
} from "@/lib/geometry/rle";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import { golden } from "@/tests/support/golden";

type Coded = { size: [number, number]; counts: string };
const decode = ({ size: [height, width], counts }: Coded): Rle => rleFromString(counts, width, height);

type AreaCase = {
  ring: Ring;
  signed_area: number;
  perimeter: number;
  centroid: Point;
  bbox: [number, number, number, number];
  convex_hull_area: number;
};
const areas = golden<AreaCase>("geometry", "polygon_area");

describe.skipIf(areas.cases.length === 0)(`rings against ${areas.header.made}`, () => {
  it.each(areas.cases.map((c, i) => [i, c] as const))("ring %i has the expected measures", (_, c) => {
    const relative = (value: number, expected: number) =>
      expect(Math.abs(value - expected) / Math.max(1, Math.abs(expected))).toBeLessThan(1e-9);
    relative(signedRingArea(c.ring), c.signed_area);
    relative(ringPerimeter(c.ring), c.perimeter);
    relative(ringsArea([c.ring]), Math.abs(c.signed_area));
    relative(Math.abs(signedRingArea(convexHull(c.ring))), c.convex_hull_area);
    const centroid = ringCentroid(c.ring);
    relative(centroid?.[0] ?? NaN, c.centroid[0]);
    relative(centroid?.[1] ?? NaN, c.centroid[1]);
    const [left, top, right, bottom] = c.bbox;
    const box = boxOfRing(c.ring);
    expect([box[0], box[1]]).toEqual([left, top]);
    relative(box[2], right - left);
    relative(box[3], bottom - top);
  });
});

type Areas = { areaA: number; areaB: number; inter: number; iou: number };
type IouCase = { kind: string; a: Rings; b: Rings; evenodd: Areas };
const ious = golden<IouCase>("geometry", "polygon_iou");

describe.skipIf(ious.cases.length === 0)(`even-odd IoU against ${ious.header.made}`, () => {
  it.each(ious.cases.map((c, i) => [i, c.kind, c] as const))("pair %i (%s) is exact", (_, kind, c) => {
    // The tolerance that the file states; measured on all pairs is 2e-12.
    const tolerance = kind === "sliver" || kind === "selfx" ? 1e-6 : 1e-9;
    expect(Math.abs(ringsIou(c.a, c.b) - c.evenodd.iou)).toBeLessThan(tolerance);
    expect(ringsIou(c.b, c.a)).toBe(ringsIou(c.a, c.b));
    expect(regionIou(prepareRings(c.a), prepareRings(c.b))).toBe(ringsIou(c.a, c.b));
    const scale = Math.max(1, c.evenodd.areaA, c.evenodd.areaB);
    expect(Math.abs(ringsArea(c.a) - c.evenodd.areaA) / scale).toBeLessThan(1e-9);
    expect(Math.abs(ringsIntersectionArea(c.a, c.b) - c.evenodd.inter) / scale).toBeLessThan(1e-9);
  });
});

type RleCase = Coded & { counts_uncompressed: number[]; area: number; bbox: number[] };
const codes = golden<RleCase>("geometry", "coco_rle");

describe.skipIf(codes.cases.length === 0)(`run-length codes against ${codes.header.made}`, () => {
  it.each(codes.cases.map((c, i) => [i, c] as const))("code %i is the same byte for byte", (_, c) => {
    const [height, width] = c.size;
    const rle: Rle = { width, height, counts: c.counts_uncompressed };
    expect(rleToString(rle)).toBe(c.counts);
    expect(rleFromString(c.counts, width, height)).toEqual(rle);
    expect(rleArea(rle)).toBe(c.area);
    expect(rleBounds(rle)).toEqual(c.bbox);
    expect(rleFromBytes(rleToBytes(rle), width, height)).toEqual(rle);
    const mask = maskFromRle(rle);
    expect(maskArea(mask)).toBe(c.area);
    expect(rleFromMask(mask, width, height)).toEqual(rle);
    expect(Buffer.compare(maskToBytes(mask, width, height), rleToBytes(rle))).toBe(0);
  });
});

type MaskIouCase = {
  dt: Coded[];
  gt: Coded[];
  iscrowd: number[];
  iou: number[][];
  union: Coded;
  intersection: Coded;
  dt_boxes: Box[];
  gt_boxes: Box[];
  box_iou: number[][];
};
const maskIous = golden<MaskIouCase>("geometry", "coco_mask_iou");

describe.skipIf(maskIous.cases.length === 0)(`mask and box IoU against ${maskIous.header.made}`, () => {
  it.each(maskIous.cases.map((c, i) => [i, c] as const))("matrix %i is the same", (_, c) => {
    const labels = c.dt.map(decode);
    const truths = c.gt.map(decode);
    labels.forEach((label, i) =>
      truths.forEach((truth, j) => {
        const isCrowd = c.iscrowd[j] === 1;
        expect(rleIou(prepareRle(label), prepareRle(truth), isCrowd)).toBe(c.iou[i]?.[j]);
        if (isCrowd) return;
        const [a, b] = [maskFromRle(label), maskFromRle(truth)];
        expect(maskIou(a, b)).toBe(c.iou[i]?.[j]);
        expect(boxIou(c.dt_boxes[i]!, c.gt_boxes[j]!)).toBeCloseTo(c.box_iou[i]?.[j] ?? NaN, 12);
        expect(maskIntersectionArea(a, b)).toBe(maskIntersectionArea(b, a));
      }),
    );
    expect(rleToString(mergeRle([...labels, ...truths], "union"))).toBe(c.union.counts);
    expect(rleToString(mergeRle([...labels, ...truths], "intersection"))).toBe(c.intersection.counts);
  });
});

type PolygonCase = Coded & { polygon: Ring; area: number; bbox: number[] };
const polygons = golden<PolygonCase>("geometry", "coco_polygon_rasterise");

describe.skipIf(polygons.cases.length === 0)(`polygon filling against ${polygons.header.made}`, () => {
  it.each(polygons.cases.map((c, i) => [i, c] as const))("polygon %i is the same to the pixel", (_, c) => {
    const [height, width] = c.size;
    const rle = rleFromCocoPolygon(c.polygon, width, height);
    expect(rleToString(rle)).toBe(c.counts);
    expect(rleArea(rle)).toBe(c.area);
    expect(rleBounds(rle)).toEqual(c.bbox);
  });
});

type BoundaryCase = {
  size: [number, number];
  d: number;
  a: string;
  b: string;
  mask_iou: number;
  boundary_a: string;
  boundary_b: string;
  boundary_iou: number;
};
const boundaries = golden<BoundaryCase>("geometry", "boundary_iou");

describe.skipIf(boundaries.cases.length === 0)(`boundary IoU against ${boundaries.header.made}`, () => {
  it.each(boundaries.cases.map((c, i) => [i, c] as const))("pair %i is the same", (_, c) => {
    const [height, width] = c.size;
    const a = maskFromRle(rleFromString(c.a, width, height));
    const b = maskFromRle(rleFromString(c.b, width, height));
    expect(boundaryThickness(width, height)).toBe(c.d);
    expect(rleToString(rleFromMask(boundaryBand(a, c.d), width, height))).toBe(c.boundary_a);
    expect(rleToString(rleFromMask(boundaryBand(b, c.d), width, height))).toBe(c.boundary_b);
    expect(maskIou(a, b)).toBeCloseTo(c.mask_iou, 12);
    expect(boundaryIou(a, b, c.d)).toBeCloseTo(c.boundary_iou, 12);
  });
});

type OrientationCase = {
  orientation: Orientation;
  stored_size: [number, number];
  display_size: [number, number];
  pixels: { stored: Point; display: Point }[];
};
const orientations = golden<OrientationCase>("geometry", "exif_orientation");

describe.skipIf(orientations.cases.length === 0)(`orientation against ${orientations.header.made}`, () => {
  it.each(orientations.cases.map((c) => [c.orientation, c.stored_size, c] as const))(
    "orientation %i of %o goes where it should and back",
    (orientation, [width, height], c) => {
      expect(uprightSize(width, height, orientation)).toEqual(c.display_size);
      for (const { stored, display } of c.pixels) {
        expect(pixelToUpright(stored, width, height, orientation)).toEqual(display);
        const back = toStored([display[0] + 0.5, display[1] + 0.5], width, height, orientation);
        expect(back).toEqual([stored[0] + 0.5, stored[1] + 0.5]);
      }
    },
  );
});
