import { addCoverage, type Grid } from "./field";
import { groupImage } from "./mergeImage";
import { prepareImage } from "./prepare";
import { ROW_PHASE, spansOf } from "./spans";
import { DEFAULT_SETTINGS, type ConsensusSettings, type ImageLabels, type Reliability } from "./types";

/** Row-major, `width x height` cells of `cellPx` px; cell (0, 0) is at the image's top left corner. */
export type HeatMap = { width: number; height: number; cellPx: number; values: Float32Array };

/** Cells along the longer side of the image at most. */
const CELLS_MAX = 256;

/**
 * Where annotators disagree, 0 (all or nobody) to 1 (half of them): per object 4 p (1 - p) for the share p of
 * independent people whose drawing of it covers the cell; of several objects the greatest. Someone who did not
 * draw an object counts as not covering it, so a doubtful object glows as a whole and a sure one along its
 * edge. O(instances x cells under them).
 */
export function heatMap(
  labels: ImageLabels,
  settings: Partial<ConsensusSettings> = {},
  reliability?: Reliability,
): HeatMap {
  const cellPx = Math.max(1, 2 ** Math.ceil(Math.log2(Math.max(labels.width, labels.height, 1) / CELLS_MAX)));
  const width = Math.max(1, Math.ceil(labels.width / cellPx));
  const height = Math.max(1, Math.ceil(labels.height / cellPx));
  const values = new Float32Array(width * height);
  const image = prepareImage(labels, reliability);
  if (image.voterCount === 0) return { width, height, cellPx, values };
  // Rows are sampled at the middle of each cell: shapes are shifted so that the middle is a row of the grid.
  const grid: Grid = { cellPx, firstColumn: 0, firstRow: 0, columns: width, rows: height };
  const shift = ROW_PHASE - cellPx / 2;
  const share = new Float32Array(values.length);
  const own = new Float32Array(values.length);
  for (const { members, parts } of groupImage(image, { ...DEFAULT_SETTINGS, ...settings }, reliability)
    .list) {
    share.fill(0);
    const voters = new Map<number, number[]>();
    for (const item of [...members, ...parts]) {
      const { voter } = image.items[item]!;
      voters.set(voter, [...(voters.get(voter) ?? []), item]);
    }
    for (const items of voters.values()) {
      own.fill(0);
      for (const item of items) {
        const { shape } = image.items[item]!.instance;
        addCoverage(grid, spansAtStep(shape, shift, cellPx), own);
      }
      for (let k = 0; k < own.length; k++) share[k]! += Math.min(1, own[k]!) / image.voterCount;
    }
    for (let k = 0; k < share.length; k++) {
      const p = share[k]!;
      const doubt = 4 * p * (1 - p);
      if (doubt > values[k]!) values[k] = doubt;
    }
  }
  return { width, height, cellPx, values };
}

/** A coarse shape may have wider rows than the map; it is then read at the map's own rows. */
function spansAtStep(
  shape: Parameters<typeof spansOf>[0],
  dy: number,
  cellPx: number,
): ReturnType<typeof spansOf> {
  const moved =
    shape.kind === "box"
      ? { kind: "box" as const, box: [shape.box[0], shape.box[1] + dy, shape.box[2], shape.box[3]] as const }
      : {
          kind: "polygon" as const,
          rings: shape.rings.map((ring) => ring.map(([x, y]) => [x, y + dy] as const)),
        };
  return spansOf(moved, cellPx);
}
