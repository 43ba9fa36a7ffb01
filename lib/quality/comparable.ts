import { boundaryIou } from "@/lib/geometry/boundary";
import { boxArea, boxIou, boxIntersectionArea, boxOfShape, ringOfBox } from "@/lib/geometry/box";
import { maskArea, rasteriseRings, type Mask } from "@/lib/geometry/mask";
import { prepareShape, regionIntersectionArea, regionIou, type Region } from "@/lib/geometry/region";
import {
  maskFromRle,
  prepareRle,
  rleBounds,
  rleFromMask,
  rleIntersectionArea,
  rleIou,
  type LabelShape,
  type RleRuns,
} from "@/lib/geometry/rle";
import type { Box } from "@/lib/geometry/types";

/** A shape with everything that comparisons of it need, each made at most once and only when asked for. */
export type Comparable = {
  readonly kind: LabelShape["kind"];
  readonly box: Box;
  readonly areaPx2: number;
  /** The outline; only for boxes and polygons. */
  readonly region: Region | undefined;
  readonly runs: () => RleRuns;
  readonly mask: () => Mask;
};

/** Makes a shape of an image of width x height px ready to be compared. */
export function toComparable(shape: LabelShape, width: number, height: number): Comparable {
  if (shape.kind === "mask") {
    const runs = prepareRle(shape.rle);
    return {
      kind: "mask",
      box: rleBounds(shape.rle),
      areaPx2: runs.areaPx,
      region: undefined,
      runs: () => runs,
      mask: once(() => maskFromRle(shape.rle)),
    };
  }
  const region = prepareShape(shape);
  const rings = shape.kind === "box" ? [ringOfBox(shape.box)] : shape.rings;
  const mask = once(() => rasteriseRings(rings, width, height));
  return {
    kind: shape.kind,
    box: boxOfShape(shape),
    areaPx2: region.areaPx2,
    region,
    runs: once(() => prepareRle(rleFromMask(mask(), width, height))),
    mask,
  };
}

function once<T>(make: () => T): () => T {
  let made: { readonly value: T } | undefined;
  return () => (made ??= { value: make() }).value;
}

/**
 * IoU of a label with a true object, 0..1. Where the truth is only a box, boxes are compared; outlines are
 * compared by exact area, and where pixels are involved, outlines become the pixels whose centres they hold.
 */
export function iouWithTruth(label: Comparable, truth: Comparable): number {
  if (boxIntersectionArea(label.box, truth.box) === 0) return 0;
  if (truth.kind === "box") return boxIou(label.box, truth.box);
  if (label.region && truth.region) return regionIou(label.region, truth.region);
  return rleIou(label.runs(), truth.runs());
}

/** Share of the label's own area that lies in the region, 0..1. */
export function shareInside(label: Comparable, region: Comparable): number {
  if (boxIntersectionArea(label.box, region.box) === 0) return 0;
  if (region.kind === "box") {
    const area = boxArea(label.box);
    return area > 0 ? boxIntersectionArea(label.box, region.box) / area : 0;
  }
  if (label.region && region.region) {
    return label.areaPx2 > 0 ? regionIntersectionArea(label.region, region.region) / label.areaPx2 : 0;
  }
  const runs = label.runs();
  return runs.areaPx > 0 ? rleIntersectionArea(runs, region.runs()) / runs.areaPx : 0;
}

/** Boundary IoU of a label with a true object; where the truth is only a box, that of the two boxes. */
export function boundaryIouWithTruth(
  label: Comparable,
  truth: Comparable,
  thicknessPx: number,
  width: number,
  height: number,
): number {
  const drawn = truth.kind === "box" ? rasteriseRings([ringOfBox(label.box)], width, height) : label.mask();
  if (maskArea(drawn) === 0) return 0;
  return boundaryIou(drawn, truth.mask(), thicknessPx);
}
