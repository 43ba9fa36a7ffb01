import { boxIou, boxArea } from "./box";
import { prepareShape, regionIou, ringsArea, ringsIou } from "./region";
import type { Shape } from "./types";

/**
 * Intersection over union of two shapes, 0..1, by area (even-odd for polygons). A box and a polygon are compared as
 * regions. Symmetric; 0 where either has no area. Prepare regions to compare one shape with many.
 */
export function shapeIou(a: Shape, b: Shape): number {
  if (a.kind === "box" && b.kind === "box") return boxIou(a.box, b.box);
  if (a.kind === "polygon" && b.kind === "polygon") return ringsIou(a.rings, b.rings);
  return regionIou(prepareShape(a), prepareShape(b));
}

/** Area of a shape in px². */
export function shapeArea(shape: Shape): number {
  return shape.kind === "box" ? boxArea(shape.box) : ringsArea(shape.rings);
}
