import { gradientOf } from "@/lib/vision/gradient";
import { blurLab, toLab } from "@/lib/vision/lab";
import type { Raster } from "@/lib/vision/raster";

const TURNS = 6;
/** L, a, b, gradient strength, and strength along each of six directions. */
export const CHANNELS = 4 + TURNS;
export const CELLS_A_SIDE = 8;
export const WINDOW_FEATURES = CELLS_A_SIDE * CELLS_A_SIDE * CHANNELS;
/** A window shows this much more than its box: what lies around an object tells where it ends. */
export const CONTEXT = 1.25;

/** Integral channels of a picture, interleaved: (width + 1) x (height + 1) x CHANNELS. */
export type Channels = { width: number; height: number; sums: Float64Array };

/**
 * Colour, gradient strength and direction as sums over rectangles (Dollár et al., 2009; Dalal and Triggs, 2005), each scaled to
 * about -1..1. O(pixels x channels).
 */
export function channelsOf(raster: Raster): Channels {
  const { width, height } = raster;
  const lab = blurLab(toLab(raster));
  const { strength, direction } = gradientOf(lab, TURNS);
  const stride = (width + 1) * CHANNELS;
  const sums = new Float64Array(stride * (height + 1));
  const row = new Float64Array(CHANNELS);
  for (let y = 0, i = 0; y < height; y++) {
    row.fill(0);
    for (let x = 0; x < width; x++, i++) {
      row[0]! += lab.l[i]! / 50 - 1;
      row[1]! += lab.a[i]! / 30;
      row[2]! += lab.b[i]! / 30;
      // The root keeps one hard edge from outshouting all texture.
      const s = Math.sqrt(strength[i]!) / 2;
      row[3]! += s;
      row[4 + direction[i]!]! += s;
      const at = (y + 1) * stride + (x + 1) * CHANNELS;
      for (let c = 0; c < CHANNELS; c++) sums[at + c] = sums[at - stride + c]! + row[c]!;
    }
  }
  return { width, height, sums };
}

/** Writes the means of 8 x 8 cells over the box and its context; what lies outside the picture repeats its edge. */
export function describeWindow(
  { width, height, sums }: Channels,
  x: number,
  y: number,
  w: number,
  h: number,
  out: Float32Array | Float64Array,
  at: number,
): void {
  const stride = (width + 1) * CHANNELS;
  const left = x + w / 2 - (w * CONTEXT) / 2;
  const top = y + h / 2 - (h * CONTEXT) / 2;
  for (let row = 0; row < CELLS_A_SIDE; row++) {
    let y0 = Math.round(top + (row * h * CONTEXT) / CELLS_A_SIDE);
    let y1 = Math.round(top + ((row + 1) * h * CONTEXT) / CELLS_A_SIDE);
    y0 = Math.min(height - 1, Math.max(0, y0));
    y1 = Math.min(height, Math.max(y0 + 1, y1));
    for (let column = 0; column < CELLS_A_SIDE; column++) {
      let x0 = Math.round(left + (column * w * CONTEXT) / CELLS_A_SIDE);
      let x1 = Math.round(left + ((column + 1) * w * CONTEXT) / CELLS_A_SIDE);
      x0 = Math.min(width - 1, Math.max(0, x0));
      x1 = Math.min(width, Math.max(x0 + 1, x1));
      const share = 1 / ((x1 - x0) * (y1 - y0));
      const a = y0 * stride + x0 * CHANNELS;
      const b = y0 * stride + x1 * CHANNELS;
      const c = y1 * stride + x0 * CHANNELS;
      const d = y1 * stride + x1 * CHANNELS;
      for (let n = 0; n < CHANNELS; n++)
        out[at++] = (sums[d + n]! - sums[b + n]! - sums[c + n]! + sums[a + n]!) * share;
    }
  }
}

export type Hit = { x: number; y: number; w: number; h: number; score: number };

/**
 * Scores every window of one size on a grid of its own cells with linear weights (WINDOW_FEATURES + 1, the last the
 * constant) and returns those above `least` that no neighbour on the grid beats. O(windows x features).
 */
export function scanWindows(
  channels: Channels,
  w: number,
  h: number,
  weights: ArrayLike<number>,
  least: number,
): Hit[] {
  const { width, height, sums } = channels;
  const cellX = (w * CONTEXT) / CELLS_A_SIDE;
  const cellY = (h * CONTEXT) / CELLS_A_SIDE;
  // Half the context may hang over each side of the picture.
  const overX = Math.ceil(((CONTEXT - 1) / 2) * CELLS_A_SIDE);
  const columns = Math.floor(width / cellX) + 2 * overX;
  const rows = Math.floor(height / cellY) + 2 * overX;
  if (columns < CELLS_A_SIDE || rows < CELLS_A_SIDE) return [];
  const stride = (width + 1) * CHANNELS;
  const grid = new Float32Array(columns * rows * CHANNELS);
  for (let row = 0, at = 0; row < rows; row++) {
    const y0 = Math.min(height - 1, Math.max(0, Math.round((row - overX) * cellY)));
    const y1 = Math.min(height, Math.max(y0 + 1, Math.round((row - overX + 1) * cellY)));
    for (let column = 0; column < columns; column++) {
      const x0 = Math.min(width - 1, Math.max(0, Math.round((column - overX) * cellX)));
      const x1 = Math.min(width, Math.max(x0 + 1, Math.round((column - overX + 1) * cellX)));
      const share = 1 / ((x1 - x0) * (y1 - y0));
      const a = y0 * stride + x0 * CHANNELS;
      const b = y0 * stride + x1 * CHANNELS;
      const c = y1 * stride + x0 * CHANNELS;
      const d = y1 * stride + x1 * CHANNELS;
      for (let n = 0; n < CHANNELS; n++)
        grid[at++] = (sums[d + n]! - sums[b + n]! - sums[c + n]! + sums[a + n]!) * share;
    }
  }
  const acrossCount = columns - CELLS_A_SIDE + 1;
  const downCount = rows - CELLS_A_SIDE + 1;
  const scores = new Float32Array(acrossCount * downCount);
  const line = CELLS_A_SIDE * CHANNELS;
  const kernel = Float32Array.from({ length: WINDOW_FEATURES }, (_, n) => weights[n]!);
  for (let row = 0; row < downCount; row++) {
    for (let column = 0; column < acrossCount; column++) {
      let sum = weights[WINDOW_FEATURES]!;
      for (let cell = 0; cell < CELLS_A_SIDE; cell++) {
        const from = ((row + cell) * columns + column) * CHANNELS;
        const at = cell * line;
        for (let n = 0; n < line; n++) sum += grid[from + n]! * kernel[at + n]!;
      }
      scores[row * acrossCount + column] = sum;
    }
  }
  const hits: Hit[] = [];
  for (let row = 0; row < downCount; row++) {
    for (let column = 0; column < acrossCount; column++) {
      const score = scores[row * acrossCount + column]!;
      if (score < least || isBeaten(scores, acrossCount, downCount, column, row)) continue;
      const x = (column - overX) * cellX + (w * (CONTEXT - 1)) / 2;
      const y = (row - overX) * cellY + (h * (CONTEXT - 1)) / 2;
      hits.push({ x, y, w, h, score });
    }
  }
  return hits;
}

function isBeaten(scores: Float32Array, columns: number, rows: number, column: number, row: number): boolean {
  const own = scores[row * columns + column]!;
  for (let y = Math.max(0, row - 1); y <= Math.min(rows - 1, row + 1); y++) {
    for (let x = Math.max(0, column - 1); x <= Math.min(columns - 1, column + 1); x++) {
      const other = scores[y * columns + x]!;
      if (other > own || (other === own && y * columns + x < row * columns + column)) return true;
    }
  }
  return false;
}
