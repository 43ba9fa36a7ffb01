import type { Lab } from "./lab";

/** Strength (Lab units a px step) and direction (0 .. bins - 1 over half a turn) of the steepest change at each pixel. */
export type Gradient = { strength: Float32Array; direction: Uint8Array };

/**
 * Central differences in L, a and b; each pixel takes the plane with the steepest change (Dalal and Triggs, 2005).
 * Edges are repeated. O(pixels).
 */
export function gradientOf({ width, height, l, a, b }: Lab, bins: number): Gradient {
  const count = width * height;
  const strength = new Float32Array(count);
  const direction = new Uint8Array(count);
  const planes = [l, a, b];
  for (let y = 0; y < height; y++) {
    const up = y > 0 ? -width : 0;
    const down = y + 1 < height ? width : 0;
    for (let x = 0; x < width; x++) {
      const i = y * width + x;
      const before = x > 0 ? i - 1 : i;
      const after = x + 1 < width ? i + 1 : i;
      let best = -1;
      let bestX = 0;
      let bestY = 0;
      for (let p = 0; p < 3; p++) {
        const plane = planes[p]!;
        const gx = plane[after]! - plane[before]!;
        const gy = plane[i + down]! - plane[i + up]!;
        const size = gx * gx + gy * gy;
        if (size > best) {
          best = size;
          bestX = gx;
          bestY = gy;
        }
      }
      strength[i] = Math.sqrt(best) / 2;
      direction[i] = directionOf(bestX, bestY, bins);
    }
  }
  return { strength, direction };
}

/** Bin of a direction over half a turn. Compares tangents, which is ten times as fast as an arc tangent. */
function directionOf(x: number, y: number, bins: number): number {
  if (bins !== 8) {
    const turn = Math.atan2(y, x) / Math.PI;
    return Math.min(bins - 1, ((turn < 0 ? turn + 1 : turn) * bins) | 0);
  }
  if (y < 0 || (y === 0 && x < 0)) {
    x = -x;
    y = -y;
  }
  const across = x < 0 ? -x : x;
  const octant = y < TAN_22 * across ? 0 : y < across ? 1 : TAN_22 * y < across ? 2 : 3;
  return x >= 0 ? octant : 7 - octant;
}

const TAN_22 = Math.tan(Math.PI / 8);

/** Sums over all rectangles from the top left corner: (width + 1) x (height + 1). */
export function integralOf(plane: ArrayLike<number>, width: number, height: number): Float64Array {
  const stride = width + 1;
  const sums = new Float64Array(stride * (height + 1));
  for (let y = 0; y < height; y++) {
    let row = 0;
    for (let x = 0; x < width; x++) {
      row += plane[y * width + x]!;
      sums[(y + 1) * stride + x + 1] = sums[y * stride + x + 1]! + row;
    }
  }
  return sums;
}

/** Sum over the pixels left <= x < right, top <= y < bottom from `integralOf`. */
export function sumIn(
  sums: Float64Array,
  stride: number,
  left: number,
  top: number,
  right: number,
  bottom: number,
): number {
  return (
    sums[bottom * stride + right]! -
    sums[top * stride + right]! -
    sums[bottom * stride + left]! +
    sums[top * stride + left]!
  );
}
