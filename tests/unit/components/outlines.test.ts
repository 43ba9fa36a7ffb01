import polygonClipping, { type MultiPolygon, type Ring } from "polygon-clipping";
import { expect, it } from "vitest";
import { AGREED_OUTLINE, OUTLINES, type SketchPoint } from "@/components/marketing/outlines";

it.each(OUTLINES.map((outline) => [outline.station, outline] as const))(
  "the figure printed for outline %i is its IoU with the agreed line as drawn",
  (_station, outline) => {
    const [drawn, agreed] = [[ringOf(outline.points)], [ringOf(AGREED_OUTLINE)]];
    const shared = areaOf(polygonClipping.intersection(drawn, agreed));
    const covered = areaOf(polygonClipping.union(drawn, agreed));
    expect((shared / covered).toFixed(2)).toBe(outline.iou.toFixed(2));
  },
);

it("agrees with four of the five better than with the one that stopped at the neck", () => {
  const stopped = OUTLINES.find((outline) => outline.station === 4);
  for (const outline of OUTLINES.filter((other) => other !== stopped)) {
    expect(outline.iou).toBeGreaterThan(stopped?.iou ?? 1);
  }
});

function ringOf(points: readonly SketchPoint[]): Ring {
  return points.map(([x, y]) => [x, y]);
}

function areaOf(polygons: MultiPolygon): number {
  return polygons.flat().reduce((sum, ring) => sum + signedArea(ring), 0);
}

/** Shoelace; outer rings and holes come out of the clipper with opposite signs. */
function signedArea(ring: Ring): number {
  return ring.reduce((sum, [x, y], index) => {
    const [nextX, nextY] = ring[(index + 1) % ring.length] ?? [x, y];
    return sum + (x * nextY - nextX * y) / 2;
  }, 0);
}
