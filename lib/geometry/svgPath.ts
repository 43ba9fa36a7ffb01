import type { Shape } from "./types";

/** What a shape is traced with: a `Path2D`, a canvas context, or a writer of path data. */
export type Tracer = {
  moveTo: (x: number, y: number) => void;
  lineTo: (x: number, y: number) => void;
  closePath: () => void;
};

/**
 * Traces a shape as closed subpaths, one a ring, to be filled under the even-odd rule; px of the image. A box
 * starts at its top left corner and runs clockwise on screen. Gives back the tracer.
 */
export function traceShape<T extends Tracer>(shape: Shape, tracer: T): T {
  if (shape.kind === "box") {
    const [x, y, width, height] = shape.box;
    tracer.moveTo(x, y);
    tracer.lineTo(x + width, y);
    tracer.lineTo(x + width, y + height);
    tracer.lineTo(x, y + height);
    tracer.closePath();
    return tracer;
  }
  for (const ring of shape.rings) {
    ring.forEach(([x, y], index) => (index === 0 ? tracer.moveTo(x, y) : tracer.lineTo(x, y)));
    tracer.closePath();
  }
  return tracer;
}

/**
 * The same as path data of SVG 2 (section 9.3). Coordinates are written whole, so that reading them back gives
 * the same numbers. A canvas traces the shape itself: to parse the text of a thousand
 * outlines delays the opening of the desk (`npm run bench:desk`).
 */
export function svgPathOf(shape: Shape): string {
  const parts: string[] = [];
  traceShape(shape, {
    moveTo: (x, y) => parts.push(`M${x} ${y}`),
    lineTo: (x, y) => parts.push(`L${x} ${y}`),
    closePath: () => parts.push("Z"),
  });
  return parts.join("");
}
