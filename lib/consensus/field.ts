import type { Box } from "@/lib/geometry/types";
import { ROW_PHASE, type Spans } from "./spans";

/**
 * A grid of sample points over one object: node (column, row) stands for x in [(firstColumn + column) * cellPx, + cellPx)
 * at y = (firstRow + row) * cellPx + ROW_PHASE. One node of margin lies on every side, so that outlines close.
 */
export type Grid = {
  readonly cellPx: number;
  readonly firstColumn: number;
  readonly firstRow: number;
  readonly columns: number;
  readonly rows: number;
};

/** Nodes along the longer side at most: an outline is then right to half a per cent of the object's size. */
const NODES_MAX = 96;

/** The grid for shapes inside `box`, no finer than the rows of any of them. */
export function gridFor(box: Box, coarsestStepPx: number, nodesMax = NODES_MAX): Grid {
  const longest = Math.max(box[2], box[3], 1e-6);
  const wanted = 2 ** Math.ceil(Math.log2(longest / nodesMax));
  const cellPx = Math.max(coarsestStepPx, longest < nodesMax / 8 ? wanted : Math.max(wanted, 1));
  const firstColumn = Math.floor(box[0] / cellPx) - 1;
  const firstRow = Math.floor((box[1] - ROW_PHASE) / cellPx) - 1;
  const columns = Math.ceil((box[0] + box[2]) / cellPx) + 1 - firstColumn;
  const rows = Math.ceil((box[1] + box[3] - ROW_PHASE) / cellPx) + 2 - firstRow;
  return { cellPx, firstColumn, firstRow, columns, rows };
}

/** Share of each node's cell that the region covers, 0..1, `rows x columns`; added to `into` times `weight`. */
export function addCoverage(grid: Grid, spans: Spans, into: Float32Array, weight = 1): void {
  const { cellPx, columns, firstColumn } = grid;
  const stride = cellPx / spans.stepPx;
  const rowCount = spans.offsets.length - 1;
  const { ends, offsets } = spans;
  for (let row = 0; row < grid.rows; row++) {
    const own = (row + grid.firstRow) * stride - spans.firstRow;
    if (own < 0 || own >= rowCount) continue;
    const base = row * columns;
    for (let k = offsets[own]!; k < offsets[own + 1]!; k += 2) {
      const from = Math.max(0, ends[k]! / cellPx - firstColumn);
      const to = Math.min(columns, ends[k + 1]! / cellPx - firstColumn);
      if (!(to > from)) continue;
      const first = Math.floor(from);
      const last = Math.min(columns - 1, Math.floor(to));
      if (first === last) {
        into[base + first]! += weight * (to - from);
        continue;
      }
      into[base + first]! += weight * (first + 1 - from);
      for (let column = first + 1; column < last; column++) into[base + column]! += weight;
      into[base + last]! += weight * (to - last);
    }
  }
}
