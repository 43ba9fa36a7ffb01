import { contours } from "@/lib/consensus/contour";
import { addCoverage, gridFor, type Grid } from "@/lib/consensus/field";
import { unionBox } from "@/lib/consensus/fuse";
import { boxesMeet, ROW_PHASE, spansOf, type Spans } from "@/lib/consensus/spans";
import type { Box, Ring, Rings } from "@/lib/geometry/types";

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
  const a = cover(grid, all.slice(0, first.length));
  // What does not come near the first changes nothing in it.
  const near = all
    .slice(first.length)
    .filter(
      ({ box }) =>
        how === "closed" ||
        how === "with" ||
        all.slice(0, first.length).some((own) => boxesMeet(own.box, grown(box))),
    );
  const b = cover(grid, near);
  let field = a;
  for (let k = 0; k < field.length; k++) {
    const value = a[k]!;
    field[k] =
      how === "without"
        ? Math.min(value, 1 - b[k]!)
        : how === "common"
          ? Math.min(value, b[k]!)
          : Math.max(value, b[k]!);
  }
  if (how === "closed") field = spread(grid, spread(grid, field, Math.max), Math.min);
  return [...contours(grid, field, 0.5)];
}

/** A margin of more than a node. */
function grown([x, y, width, height]: Box): Box {
  return [x - 4, y - 4, width + 8, height + 8];
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
  const wide = spread(grid, cover(grid, all.slice(0, 1)), Math.max);
  const other = cover(grid, all.slice(1));
  return wide.some((value, k) => value > 0.5 && other[k]! > 0.5);
}

/** Largest coverage of each node by any of the regions. */
function cover(grid: Grid, regions: readonly Spans[]): Float32Array {
  const { cellPx, columns, firstRow } = grid;
  const field = new Float32Array(columns * grid.rows);
  const own = new Float32Array(field.length);
  for (const spans of regions) {
    const [, y, , height] = spans.box;
    const from = columns * Math.max(0, Math.floor((y - ROW_PHASE) / cellPx) - firstRow - 1);
    const to = columns * Math.min(grid.rows, Math.ceil((y + height - ROW_PHASE) / cellPx) - firstRow + 2);
    addCoverage(grid, spans, own);
    for (let k = from; k < to; k++) {
      if (own[k]! > field[k]!) field[k] = own[k]!;
      own[k] = 0;
    }
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
