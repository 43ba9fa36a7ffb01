import type { Box, Point, Shape } from "./types";

/** Value of the EXIF tag 0x0112: how the stored pixels must be turned or mirrored to stand upright. */
export type Orientation = 1 | 2 | 3 | 4 | 5 | 6 | 7 | 8;

/** Whether a value is one of the eight that EXIF defines. */
export function isOrientation(value: unknown): value is Orientation {
  return typeof value === "number" && Number.isInteger(value) && value >= 1 && value <= 8;
}

/** Width and height of the upright image. */
export function uprightSize(width: number, height: number, orientation: Orientation): [number, number] {
  return orientation >= 5 ? [height, width] : [width, height];
}

/**
 * Where a point of the stored image (width x height px) lies in the upright one. Points are continuous, so the
 * centre of a pixel goes to the centre of a pixel. Source: EXIF 2.3, tag Orientation.
 */
export function toUpright([x, y]: Point, width: number, height: number, orientation: Orientation): Point {
  switch (orientation) {
    case 1:
      return [x, y];
    case 2:
      return [width - x, y];
    case 3:
      return [width - x, height - y];
    case 4:
      return [x, height - y];
    case 5:
      return [y, x];
    case 6:
      return [height - y, x];
    case 7:
      return [height - y, width - x];
    case 8:
      return [y, width - x];
  }
}

/** Where a point of the upright image lies in the stored one, whose size is width x height px. */
export function toStored([x, y]: Point, width: number, height: number, orientation: Orientation): Point {
  switch (orientation) {
    case 6:
      return [y, height - x];
    case 8:
      return [width - y, x];
    case 7:
      return [width - y, height - x];
    default:
      // The other five undo themselves.
      return toUpright([x, y], width, height, orientation);
  }
}

/** The same for the pixel in this column and row: pixels are cells, so they are mapped by their centres. */
export function pixelToUpright(
  [column, row]: Point,
  width: number,
  height: number,
  orientation: Orientation,
): Point {
  const [x, y] = toUpright([column + 0.5, row + 0.5], width, height, orientation);
  return [x - 0.5, y - 0.5];
}

/** The upright box of a box of the stored image. */
export function boxToUpright(
  [x, y, w, h]: Box,
  width: number,
  height: number,
  orientation: Orientation,
): Box {
  const [ax, ay] = toUpright([x, y], width, height, orientation);
  const [bx, by] = toUpright([x + w, y + h], width, height, orientation);
  return [Math.min(ax, bx), Math.min(ay, by), Math.abs(bx - ax), Math.abs(by - ay)];
}

/**
 * A shape of the upright image as a shape of the stored one, whose size is width x height px. Where the
 * orientation mirrors, rings are reversed, so that each keeps the sense in which it runs. O(points).
 */
export function shapeToStored(shape: Shape, width: number, height: number, orientation: Orientation): Shape {
  if (orientation === 1) return shape;
  if (shape.kind === "box") {
    const [x, y, w, h] = shape.box;
    const [ax, ay] = toStored([x, y], width, height, orientation);
    const [bx, by] = toStored([x + w, y + h], width, height, orientation);
    return { kind: "box", box: [Math.min(ax, bx), Math.min(ay, by), Math.abs(bx - ax), Math.abs(by - ay)] };
  }
  const isMirrored = orientation === 2 || orientation === 4 || orientation === 5 || orientation === 7;
  return {
    kind: "polygon",
    rings: shape.rings.map((ring) => {
      const moved = ring.map((point) => toStored(point, width, height, orientation));
      return isMirrored ? moved.reverse() : moved;
    }),
  };
}
