import { invariant } from "@/lib/errors";

/**
 * The assignment of rows to columns with the least total cost, by shortest augmenting paths (Jonker and
 * Volgenant, 1987; rectangular form after Crouse, 2016). `cost[row][column]` is any finite number. Returns
 * the column of each row, -1 for rows left over when there are more rows than columns. Of several optimal
 * assignments one is chosen by rule, not by chance. O(n² m) for n = the shorter side.
 */
export function assign(cost: readonly (readonly number[])[]): Int32Array {
  const rowCount = cost.length;
  const columnCount = cost[0]?.length ?? 0;
  if (columnCount === 0) return new Int32Array(rowCount).fill(-1);
  invariant(
    cost.every((row) => row.length === columnCount && row.every(Number.isFinite)),
    "the cost matrix is rectangular and finite",
  );
  if (rowCount <= columnCount) return augment(cost, rowCount, columnCount, false);
  const rowOfColumn = augment(cost, columnCount, rowCount, true);
  const columnOfRow = new Int32Array(rowCount).fill(-1);
  rowOfColumn.forEach((row, column) => (columnOfRow[row] = column));
  return columnOfRow;
}

/** n rows, m ≥ n columns; `turned` reads the matrix as its transpose. */
function augment(cost: readonly (readonly number[])[], n: number, m: number, turned: boolean): Int32Array {
  const flat = new Float64Array(n * m);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < m; j++) flat[i * m + j] = turned ? cost[j]![i]! : cost[i]![j]!;
  }
  // Index 0 of these arrays is the virtual column from which each search starts.
  const rowPotential = new Float64Array(n + 1);
  const columnPotential = new Float64Array(m + 1);
  const rowAt = new Int32Array(m + 1);
  const cameFrom = new Int32Array(m + 1);
  const distance = new Float64Array(m + 1);
  const done = new Uint8Array(m + 1);
  for (let row = 1; row <= n; row++) {
    rowAt[0] = row;
    distance.fill(Infinity);
    done.fill(0);
    let column = 0;
    do {
      done[column] = 1;
      const at = rowAt[column]!;
      let delta = Infinity;
      let next = 0;
      for (let j = 1; j <= m; j++) {
        if (done[j]) continue;
        const reduced = flat[(at - 1) * m + j - 1]! - rowPotential[at]! - columnPotential[j]!;
        if (reduced < distance[j]!) {
          distance[j] = reduced;
          cameFrom[j] = column;
        }
        if (distance[j]! < delta) {
          delta = distance[j]!;
          next = j;
        }
      }
      for (let j = 0; j <= m; j++) {
        if (done[j]) {
          rowPotential[rowAt[j]!]! += delta;
          columnPotential[j]! -= delta;
        } else distance[j]! -= delta;
      }
      column = next;
    } while (rowAt[column] !== 0);
    while (column !== 0) {
      const previous = cameFrom[column]!;
      rowAt[column] = rowAt[previous]!;
      column = previous;
    }
  }
  const columnOfRow = new Int32Array(n).fill(-1);
  for (let j = 1; j <= m; j++) if (rowAt[j]! > 0) columnOfRow[rowAt[j]! - 1] = j - 1;
  return columnOfRow;
}
