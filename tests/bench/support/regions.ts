import { contours } from "@/lib/consensus/contour";
import { addCoverage, gridFor, type Grid } from "@/lib/consensus/field";
import { unionBox } from "@/lib/consensus/fuse";
import { spansOf } from "@/lib/consensus/spans";
import type { Ring, Rings } from "@/lib/geometry/types";

/** How "first" and "second" regions are combined. */
export type Combination = "with" | "without" | "common" | "closed";

/** Reach of "closed", in nodes: gaps of up to twice that are filled. */
const REACH = 3;

/**
 * Set operations on a half-pixel grid: coarse, but they cannot fail on any input, which matters more for
 * simulated drawings than exactness does.
 */
export function combine(first: readonly Rings[], second: readonly Rings[], how: Combination): Ring[] {
  const all = [...first, ...second].map((rings) => spansOf({ kind: "polygon", rings }));
  const frame = unionBox(all.map(({ box }) => box));
  const [x, y, width, height] = frame;
  const grid = gridFor(
    [x - 4, y - 4, width + 8, height + 8],
    Math.max(0.5, ...all.map(({ stepPx }) => stepPx)),
    512,
  );
  const a = cover(grid, first);
  const b = cover(grid, second);
  let field: Float32Array = a.map((value, k) => {
    if (how === "without") return Math.min(value, 1 - b[k]!);
    if (how === "common") return Math.min(value, b[k]!);
    return Math.max(value, b[k]!);
  });
  if (how === "closed") field = spread(grid, spread(grid, field, Math.max), Math.min);
  return [...contours(grid, field, 0.5)];
}

/** Whether two regions come within a few px of each other. */
export function meet(a: Rings, b: Rings): boolean {
  const all = [a, b].map((rings) => spansOf({ kind: "polygon", rings }));
  const [x, y, width, height] = unionBox(all.map(({ box }) => box));
  const grid = gridFor(
    [x - 4, y - 4, width + 8, height + 8],
    Math.max(1, ...all.map(({ stepPx }) => stepPx)),
    512,
  );
  const grown = spread(grid, cover(grid, [a]), Math.max);
  const other = cover(grid, [b]);
  return grown.some((value, k) => value > 0.5 && other[k]! > 0.5);
}

function cover(grid: Grid, regions: readonly Rings[]): Float32Array {
  const field = new Float32Array(grid.columns * grid.rows);
  for (const rings of regions) {
    const own = new Float32Array(field.length);
    addCoverage(grid, spansOf({ kind: "polygon", rings }), own);
    own.forEach((value, k) => (field[k] = Math.max(field[k]!, value)));
  }
  return field;
}

/** Greatest or least value within REACH nodes along both axes. */
function spread(grid: Grid, field: Float32Array, pick: (...values: number[]) => number): Float32Array {
  let current = field;
  for (const stride of [1, grid.columns]) {
    const next = current.slice();
    for (let row = 0; row < grid.rows; row++) {
      for (let column = 0; column < grid.columns; column++) {
        const at = stride === 1 ? column : row;
        const end = stride === 1 ? grid.columns : grid.rows;
        const k = row * grid.columns + column;
        let value = current[k]!;
        for (let step = -REACH; step <= REACH; step++) {
          if (at + step >= 0 && at + step < end) value = pick(value, current[k + step * stride]!);
        }
        next[k] = value;
      }
    }
    current = next;
  }
  return current;
}
