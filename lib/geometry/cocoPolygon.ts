import { clipRingToBox } from "./clipRing";
import type { Rle } from "./rle";
import type { Ring } from "./types";

/** The reference walks the outline on a grid five times finer than the pixels. */
const SCALE = 5;

/**
 * The mask that the COCO reference implementation draws for one polygon, to the pixel: the outline is walked on a
 * grid five times finer, and each column is filled between the points where the walk leaves it. It differs from
 * the pixels whose centres lie inside (`rasteriseRings`) along the outline, so it is for exchange with COCO tools
 * only. Source: Lin et al., 2014, reference code. O(outline length + runs log runs).
 */
export function rleFromCocoPolygon(ring: Ring, width: number, height: number): Rle {
  const boundary = downsampled(walk(nearby(ring, width, height)), width, height);
  boundary.push(width * height);
  const ends = Uint32Array.from(boundary).sort();
  const runs = ends.map((end, i) => end - (ends[i - 1] ?? 0));
  const counts: number[] = [runs[0]!];
  for (let i = 1; i < runs.length; i++) {
    if (runs[i]! > 0) counts.push(runs[i]!);
    else if (++i < runs.length) counts[counts.length - 1]! += runs[i]!;
  }
  return { width, height, counts };
}

/** Outlines that leave the image by more than its own size are cut there, or the walk would have no end. */
function nearby(ring: Ring, width: number, height: number): Ring {
  const isFar = ring.some(([x, y]) => x < -width || y < -height || x > 2 * width || y > 2 * height);
  return isFar ? clipRingToBox(ring, [-width, -height, 3 * width, 3 * height]) : ring;
}

/** Every point of the outline on the fine grid. The line is walked from its lower end, so both directions agree. */
function walk(ring: Ring): { u: number[]; v: number[] } {
  const xs = ring.map(([x]) => Math.trunc(SCALE * x + 0.5));
  const ys = ring.map(([, y]) => Math.trunc(SCALE * y + 0.5));
  const u: number[] = [];
  const v: number[] = [];
  for (let i = 0; i < ring.length; i++) {
    const j = (i + 1) % ring.length;
    const dx = Math.abs(xs[j]! - xs[i]!);
    const dy = Math.abs(ys[j]! - ys[i]!);
    const isFlat = dx >= dy;
    const isBackwards = isFlat ? xs[i]! > xs[j]! : ys[i]! > ys[j]!;
    const [from, to] = isBackwards ? [j, i] : [i, j];
    const steps = isFlat ? dx : dy;
    const run = isFlat ? ys[to]! - ys[from]! : xs[to]! - xs[from]!;
    const slope = steps === 0 ? 0 : run / steps;
    for (let d = 0; d <= steps; d++) {
      const t = isBackwards ? steps - d : d;
      u.push(isFlat ? t + xs[from]! : Math.trunc(xs[from]! + slope * t + 0.5));
      v.push(isFlat ? Math.trunc(ys[from]! + slope * t + 0.5) : t + ys[from]!);
    }
  }
  return { u, v };
}

/** Positions, counted down the columns, where the outline crosses the middle of a column of pixels. */
function downsampled({ u, v }: { u: number[]; v: number[] }, width: number, height: number): number[] {
  const positions: number[] = [];
  for (let i = 1; i < u.length; i++) {
    if (u[i] === u[i - 1]) continue;
    const column = (Math.min(u[i]!, u[i]! < u[i - 1]! ? u[i]! : u[i]! - 1) + 0.5) / SCALE - 0.5;
    if (Math.floor(column) !== column || column < 0 || column > width - 1) continue;
    const row = (Math.min(v[i]!, v[i - 1]!) + 0.5) / SCALE - 0.5;
    positions.push(column * height + Math.ceil(Math.min(Math.max(row, 0), height)));
  }
  return positions;
}
