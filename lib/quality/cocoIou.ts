import { rleFromCocoPolygon } from "@/lib/geometry/cocoPolygon";
import { rasteriseRings } from "@/lib/geometry/mask";
import { partsOfRings } from "@/lib/geometry/nest";
import { mergeRle, prepareRle, rleFromMask, type Rle, type RleRuns } from "@/lib/geometry/rle";
import { ringOfBox } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";
import type { LabelShape } from "@/lib/geometry/rle";

/** IoU of a label's box with a true box as the COCO evaluation computes it; over the label's area for a crowd. */
export function cocoBoxIou(label: Box, truth: Box, isCrowd: boolean): number {
  const width = Math.min(label[2] + label[0], truth[2] + truth[0]) - Math.max(label[0], truth[0]);
  const height = Math.min(label[3] + label[1], truth[3] + truth[1]) - Math.max(label[1], truth[1]);
  if (width <= 0 || height <= 0) return 0;
  const common = width * height;
  const labelArea = label[2] * label[3];
  return common / (isCrowd ? labelArea : labelArea + truth[2] * truth[3] - common);
}

/**
 * The pixels of a shape as the COCO evaluation draws them: each ring by the reference's own rule, and their union. That
 * evaluation knows no holes, so a region with holes becomes the pixels whose centres it holds.
 */
export function cocoRuns(shape: LabelShape, width: number, height: number): RleRuns {
  return prepareRle(cocoRle(shape, width, height));
}

function cocoRle(shape: LabelShape, width: number, height: number): Rle {
  if (shape.kind === "mask") return shape.rle;
  const rings = shape.kind === "box" ? [ringOfBox(shape.box)] : shape.rings;
  if (rings.length > 1 && partsOfRings(rings).some(({ holes }) => holes.length > 0)) {
    return rleFromMask(rasteriseRings(rings, width, height), width, height);
  }
  const drawn = rings
    .filter((ring) => ring.length >= 3)
    .map((ring) => rleFromCocoPolygon(ring, width, height));
  return drawn.length === 0 ? { width, height, counts: [width * height] } : mergeRle(drawn, "union");
}
