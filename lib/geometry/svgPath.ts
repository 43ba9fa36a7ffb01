import type { Shape } from "./types";

/**
 * A shape as path data of SVG 2 (section 9.3), in px of the image: closed subpaths, one a ring, to be filled
 * under the even-odd rule. A box starts at its top left corner and runs clockwise on screen. Coordinates are
 * written whole, so that reading them back gives the same numbers. `Path2D` takes the same text.
 */
export function svgPathOf(shape: Shape): string {
  if (shape.kind === "box") {
    const [x, y, width, height] = shape.box;
    return `M${x} ${y}H${x + width}V${y + height}H${x}Z`;
  }
  return shape.rings.map((ring) => `M${ring.map(([x, y]) => `${x} ${y}`).join("L")}Z`).join("");
}
