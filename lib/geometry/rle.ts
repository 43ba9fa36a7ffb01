import { boxIntersectionArea } from "./box";
import { blankMask, forEachSpan, trimMask, type Mask } from "./mask";
import type { Box, Shape } from "./types";

/**
 * A mask of a whole image as run lengths down the columns, columns from left to right; the first run is background
 * and may be 0. The runs sum to width * height. This is the coding of the COCO data set (Lin et al., 2014).
 */
export type Rle = { readonly width: number; readonly height: number; readonly counts: readonly number[] };

/** Why a run-length code was refused; the message is one line and safe to show. */
export class RleError extends Error {
  override readonly name = "RleError";
}

/** Throws RleError unless the runs are whole, not negative and cover the image exactly. */
export function checkRle(rle: Rle): Rle {
  let pixels = 0;
  for (const run of rle.counts) {
    if (!Number.isSafeInteger(run) || run < 0)
      throw new RleError(`run length ${run} is not a whole number of pixels`);
    pixels += run;
  }
  const expected = rle.width * rle.height;
  if (pixels !== expected) throw new RleError(`runs cover ${pixels} pixels of ${expected}`);
  return rle;
}

/**
 * The COCO string of a code: each run as a difference to the run two before (from the fourth on), five bits a
 * character, low bits first, bit 5 for "more follows", characters from "0" on. Byte for byte that of the
 * reference implementation.
 */
export function rleToString({ counts }: Rle): string {
  let text = "";
  for (let i = 0; i < counts.length; i++) {
    let rest = counts[i]! - (i > 2 ? counts[i - 2]! : 0);
    for (let more = true; more;) {
      let bits = rest & 0x1f;
      rest >>= 5;
      more = (bits & 0x10) !== 0 ? rest !== -1 : rest !== 0;
      if (more) bits |= 0x20;
      text += String.fromCharCode(bits + 48);
    }
  }
  return text;
}

/** Reads a COCO string; throws RleError for foreign characters, a cut-off number or runs that miss the image's size. */
export function rleFromString(text: string, width: number, height: number): Rle {
  const counts: number[] = [];
  let at = 0;
  while (at < text.length) {
    let value = 0;
    let shift = 0;
    for (let more = true; more;) {
      if (at >= text.length) throw new RleError("the run-length string ends inside a number");
      const bits = text.charCodeAt(at++) - 48;
      if (!(bits >= 0 && bits < 64)) {
        throw new RleError(`character ${at} of the run-length string is not between "0" and "o"`);
      }
      if (shift > 30)
        throw new RleError(`the number at character ${at} of the run-length string is too long`);
      value |= (bits & 0x1f) << shift;
      shift += 5;
      more = (bits & 0x20) !== 0;
      if (!more && (bits & 0x10) !== 0 && shift < 32) value |= -1 << shift;
    }
    const before = counts.length > 2 ? counts[counts.length - 2]! : 0;
    counts.push(value + before);
  }
  return checkRle({ width, height, counts });
}

/** Number of pixels inside. */
export function rleArea({ counts }: Rle): number {
  let pixels = 0;
  for (let i = 1; i < counts.length; i += 2) pixels += counts[i]!;
  return pixels;
}

/** The smallest box of whole px around the pixels; [0, 0, 0, 0] for none. */
export function rleBounds({ height, counts }: Rle): Box {
  let left = Infinity;
  let right = -1;
  let top = Infinity;
  let bottom = -1;
  let at = 0;
  for (let i = 0; i < counts.length; i++) {
    const run = counts[i]!;
    if (i % 2 === 1 && run > 0) {
      const firstColumn = Math.floor(at / height);
      const lastColumn = Math.floor((at + run - 1) / height);
      left = Math.min(left, firstColumn);
      right = lastColumn;
      const isOneColumn = firstColumn === lastColumn;
      top = Math.min(top, isOneColumn ? at % height : 0);
      bottom = Math.max(bottom, isOneColumn ? (at + run - 1) % height : height - 1);
    }
    at += run;
  }
  return right < 0 ? [0, 0, 0, 0] : [left, top, right - left + 1, bottom - top + 1];
}

/** A code from one byte a pixel, row by row, nonzero for inside. */
export function rleFromBytes(bytes: Uint8Array, width: number, height: number): Rle {
  const counts: number[] = [];
  let inside = 0;
  let run = 0;
  for (let column = 0; column < width; column++) {
    for (let row = 0; row < height; row++) {
      const value = bytes[row * width + column]! === 0 ? 0 : 1;
      if (value !== inside) {
        counts.push(run);
        run = 0;
        inside = value;
      }
      run++;
    }
  }
  counts.push(run);
  return { width, height, counts };
}

/** One byte a pixel, row by row, 1 for inside. */
export function rleToBytes({ width, height, counts }: Rle): Uint8Array {
  const bytes = new Uint8Array(width * height);
  let column = 0;
  let row = 0;
  for (let i = 0; i < counts.length; i++) {
    for (let left = counts[i]!; left > 0;) {
      const step = Math.min(left, height - row);
      if (i % 2 === 1) for (let r = row; r < row + step; r++) bytes[r * width + column] = 1;
      row += step;
      left -= step;
      if (row === height) {
        row = 0;
        column++;
      }
    }
  }
  return bytes;
}

/** The code of a mask that lies inside an image of this size. */
export function rleFromMask(mask: Mask, width: number, height: number): Rle {
  if (mask.width === 0) return { width, height, counts: [width * height] };
  const columns: number[][] = Array.from({ length: mask.width }, () => []);
  // Runs down a column are gathered from the runs along the rows, so sparse masks cost little.
  forEachSpan(mask, (row, from, to) => {
    for (let column = from; column < to; column++) {
      const runs = columns[column - mask.x]!;
      if (runs[runs.length - 1] === row) runs[runs.length - 1] = row + 1;
      else runs.push(row, row + 1);
    }
  });
  const ends: number[] = [];
  columns.forEach((runs, i) => {
    for (const row of runs) ends.push((mask.x + i) * height + row);
  });
  return rleFromEnds(ends, width, height);
}

/** The pixels of a code. */
export function maskFromRle(rle: Rle): Mask {
  const [left, top, width, height] = rleBounds(rle);
  const mask = blankMask(left, top, width, height);
  let at = 0;
  for (let i = 0; i < rle.counts.length; i++) {
    const end = at + rle.counts[i]!;
    if (i % 2 === 1) {
      while (at < end) {
        const column = Math.floor(at / rle.height);
        const from = at - column * rle.height;
        const to = Math.min(rle.height, from + end - at);
        const bit = 1 << (column & 31);
        let word = (from - mask.y) * mask.stride + (column >> 5) - (mask.x >> 5);
        for (let row = from; row < to; row++, word += mask.stride) mask.words[word]! |= bit;
        at += to - from;
      }
    }
    at = end;
  }
  return trimMask(mask);
}

/** Turns ascending run boundaries (start, end, start, end, ..) into counts, joining runs that touch. */
function rleFromEnds(ends: readonly number[], width: number, height: number): Rle {
  const counts: number[] = [];
  let at = 0;
  for (let i = 0; i < ends.length; i += 2) {
    const start = ends[i]!;
    const end = ends[i + 1]!;
    if (end === start) continue;
    if (start === at && counts.length > 0) counts[counts.length - 1]! += end - start;
    else counts.push(start - at, end - start);
    at = end;
  }
  if (at < width * height || counts.length === 0) counts.push(width * height - at);
  return { width, height, counts };
}

/** Union (or intersection) of codes of one size, in canonical form. Throws RleError where sizes differ. O(runs). */
export function mergeRle(codes: readonly Rle[], rule: "union" | "intersection"): Rle {
  const first = codes[0];
  if (first === undefined) throw new RleError("nothing to merge");
  return codes.slice(1).reduce((merged, code) => mergeTwo(merged, code, rule), first);
}

function mergeTwo(a: Rle, b: Rle, rule: "union" | "intersection"): Rle {
  if (a.width !== b.width || a.height !== b.height) {
    throw new RleError(`masks of ${a.width} x ${a.height} and ${b.width} x ${b.height} do not merge`);
  }
  const ends: number[] = [];
  let i = 0;
  let j = 0;
  let nextA = a.counts[0] ?? 0;
  let nextB = b.counts[0] ?? 0;
  let at = 0;
  const total = a.width * a.height;
  while (at < total) {
    const next = Math.min(nextA, nextB);
    const inA = i % 2 === 1;
    const inB = j % 2 === 1;
    if (next > at && (rule === "union" ? inA || inB : inA && inB)) {
      if (ends[ends.length - 1] === at) ends[ends.length - 1] = next;
      else ends.push(at, next);
    }
    at = next;
    if (nextA === next) nextA += a.counts[++i] ?? total;
    if (nextB === next) nextB += b.counts[++j] ?? total;
  }
  return rleFromEnds(ends, a.width, a.height);
}

/** A code made ready for many comparisons: the ends of its runs of pixels, its bounds and its area. */
export type RleRuns = {
  readonly width: number;
  readonly height: number;
  /** Starts and ends of the runs of pixels, down the columns, ascending. */
  readonly ends: Int32Array;
  readonly box: Box;
  readonly areaPx: number;
};

/** Makes a code ready to be compared. */
export function prepareRle(rle: Rle): RleRuns {
  const ends = new Int32Array(rle.counts.length + (rle.counts.length % 2));
  let used = 0;
  let at = 0;
  for (let i = 0; i < rle.counts.length; i++) {
    const run = rle.counts[i]!;
    if (i % 2 === 1 && run > 0) {
      ends[used++] = at;
      ends[used++] = at + run;
    }
    at += run;
  }
  return {
    width: rle.width,
    height: rle.height,
    ends: ends.slice(0, used),
    box: rleBounds(rle),
    areaPx: rleArea(rle),
  };
}

/** Number of pixels that both hold. O(runs inside the common columns). */
export function rleIntersectionArea(a: RleRuns, b: RleRuns): number {
  if (boxIntersectionArea(a.box, b.box) === 0) return 0;
  const p = a.ends;
  const q = b.ends;
  // Both start at the first column that both reach.
  const start = Math.max(a.box[0], b.box[0]) * a.height;
  let i = firstRunEndingAfter(p, start);
  let j = firstRunEndingAfter(q, start);
  let pixels = 0;
  while (i < p.length && j < q.length) {
    const pEnd = p[i + 1]!;
    const qEnd = q[j + 1]!;
    const common = Math.min(pEnd, qEnd) - Math.max(p[i]!, q[j]!);
    if (common > 0) pixels += common;
    if (pEnd <= qEnd) i += 2;
    if (qEnd <= pEnd) j += 2;
  }
  return pixels;
}

function firstRunEndingAfter(ends: Int32Array, at: number): number {
  let low = 0;
  let high = ends.length / 2;
  while (low < high) {
    const middle = (low + high) >> 1;
    if (ends[2 * middle + 1]! <= at) low = middle + 1;
    else high = middle;
  }
  return 2 * low;
}

/**
 * Intersection over union of two codes of one image, 0..1; 0 where they share nothing. Where `truth` is a crowd
 * (many objects outlined as one), the denominator is the area of `label` alone, as in the COCO evaluation.
 */
export function rleIou(label: RleRuns, truth: RleRuns, isCrowd = false): number {
  const common = rleIntersectionArea(label, truth);
  if (common === 0) return 0;
  return common / (isCrowd ? label.areaPx : label.areaPx + truth.areaPx - common);
}

/** A region given as pixels rather than as an outline. */
export type MaskShape = { readonly kind: "mask"; readonly rle: Rle };

/** A box, an outline (even-odd) or the pixels themselves. */
export type LabelShape = Shape | MaskShape;
