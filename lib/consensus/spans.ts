import type { Box, Shape } from "@/lib/geometry/types";

/**
 * A region as the intervals that it covers on evenly spaced rows. Rows lie at y = row * stepPx + ROW_PHASE and
 * stepPx is a power of two, so the rows of a coarser shape are rows of a finer one too and any two shapes
 * can be compared without resampling. The ends of the intervals are exact, so areas converge with the
 * square of the step and shapes of whole pixels are exact up to ROWS_MAX px of height.
 */
export type Spans = {
  readonly stepPx: number;
  readonly firstRow: number;
  /** Row r owns ends[offsets[r] .. offsets[r + 1]), as pairs (from, to). */
  readonly offsets: Int32Array;
  readonly ends: Float64Array;
  readonly areaPx2: number;
  readonly box: Box;
  /** Whether the shape was drawn as a box. */
  readonly isBox: boolean;
};

/** Half a pixel: rows of whole pixels run through pixel centres, never along an edge. */
export const ROW_PHASE = 0.5;
/** Rows per shape: more costs time, fewer costs accuracy. */
const ROWS_MAX = 256;
const ROWS_MIN = 24;

/** Step of the rows for a shape of this height: 1 px where that gives 24 to 256 rows. */
export function stepFor(heightPx: number): number {
  if (!(heightPx > 0)) return 1;
  if (heightPx > ROWS_MAX) return 2 ** Math.ceil(Math.log2(heightPx / ROWS_MAX));
  if (heightPx < ROWS_MIN) return 2 ** Math.floor(Math.log2(heightPx / ROWS_MIN));
  return 1;
}

/**
 * Rows of a shape under the even-odd rule. Vertices that are not finite are left out. A shape without area gets no
 * rows and an area of 0. `stepMaxPx` is a power of two. O(vertices + rows crossed).
 */
export function spansOf(shape: Shape, stepMaxPx = Infinity): Spans {
  if (shape.kind === "box") return boxSpans(shape.box, stepMaxPx);
  let minX = Infinity;
  let minY = Infinity;
  let maxX = -Infinity;
  let maxY = -Infinity;
  for (const ring of shape.rings) {
    for (const point of ring) {
      const x = point[0];
      const y = point[1];
      if (x < minX) minX = x;
      if (x > maxX) maxX = x;
      if (y < minY) minY = y;
      if (y > maxY) maxY = y;
    }
  }
  if (!Number.isFinite(maxX - minX) || !Number.isFinite(maxY - minY)) return boxSpans([0, 0, 0, 0]);
  const box: Box = [minX, minY, maxX - minX, maxY - minY];
  const stepPx = Math.min(stepMaxPx, stepFor(maxY - minY));
  const firstRow = Math.ceil((minY - ROW_PHASE) / stepPx);
  const rowCount = Math.max(0, Math.ceil((maxY - ROW_PHASE) / stepPx) - firstRow);
  const offsets = new Int32Array(rowCount + 1);
  // First count the crossings of each row, then fill them in: no array per row.
  for (const ring of shape.rings) {
    for (let i = 0, j = ring.length - 1; i < ring.length; j = i++) {
      let y0 = ring[j]![1];
      let y1 = ring[i]![1];
      if (y0 > y1) [y0, y1] = [y1, y0];
      const last = Math.ceil((y1 - ROW_PHASE) / stepPx) - firstRow;
      for (let row = Math.ceil((y0 - ROW_PHASE) / stepPx) - firstRow; row < last; row++) offsets[row + 1]!++;
    }
  }
  for (let row = 0; row < rowCount; row++) offsets[row + 1]! += offsets[row]!;
  const ends = new Float64Array(offsets[rowCount]!);
  const filled = offsets.slice(0, rowCount);
  for (const ring of shape.rings) {
    for (let i = 0, j = ring.length - 1; i < ring.length; j = i++) {
      let a = ring[j]!;
      let b = ring[i]!;
      if (a[1] > b[1]) [a, b] = [b, a];
      const last = Math.ceil((b[1] - ROW_PHASE) / stepPx) - firstRow;
      let row = Math.ceil((a[1] - ROW_PHASE) / stepPx) - firstRow;
      if (row >= last) continue;
      const slope = (b[0] - a[0]) / (b[1] - a[1]);
      for (; row < last; row++) {
        const x = a[0] + ((row + firstRow) * stepPx + ROW_PHASE - a[1]) * slope;
        // Crossings of a row are few: insert in place.
        let at = filled[row]!++;
        const start = offsets[row]!;
        while (at > start && ends[at - 1]! > x) {
          ends[at] = ends[at - 1]!;
          at--;
        }
        ends[at] = x;
      }
    }
  }
  let length = 0;
  for (let k = 0; k < ends.length; k += 2) length += ends[k + 1]! - ends[k]!;
  return { stepPx, firstRow, offsets, ends, areaPx2: length * stepPx, box, isBox: false };
}

function boxSpans(box: Box, stepMaxPx = Infinity): Spans {
  const [x, y, width, height] = box;
  const stepPx = Math.min(stepMaxPx, stepFor(height));
  const firstRow = Math.ceil((y - ROW_PHASE) / stepPx);
  const rowCount =
    width > 0 && height > 0 ? Math.max(0, Math.ceil((y + height - ROW_PHASE) / stepPx) - firstRow) : 0;
  const offsets = Int32Array.from({ length: rowCount + 1 }, (_, row) => 2 * row);
  const ends = new Float64Array(2 * rowCount);
  for (let row = 0; row < rowCount; row++) {
    ends[2 * row] = x;
    ends[2 * row + 1] = x + width;
  }
  const areaPx2 = width > 0 && height > 0 ? width * height : 0;
  return { stepPx, firstRow, offsets, ends, areaPx2, box, isBox: true };
}

/** IoU of two boxes; 0 when they only touch or have no area. */
export function boxIou(a: Box, b: Box): number {
  const width = Math.min(a[0] + a[2], b[0] + b[2]) - Math.max(a[0], b[0]);
  const height = Math.min(a[1] + a[3], b[1] + b[3]) - Math.max(a[1], b[1]);
  if (!(width > 0 && height > 0)) return 0;
  const common = width * height;
  return common / (a[2] * a[3] + b[2] * b[3] - common);
}

/** What two regions share, and each one's own area on the rows on which they are compared, in px². */
export type Overlap = { commonPx2: number; aPx2: number; bPx2: number };

/** Overlap of the regions themselves, box or not. O(rows of the coarser). */
export function overlapOf(a: Spans, b: Spans): Overlap {
  if (a.isBox && b.isBox) {
    const width = Math.min(a.box[0] + a.box[2], b.box[0] + b.box[2]) - Math.max(a.box[0], b.box[0]);
    const height = Math.min(a.box[1] + a.box[3], b.box[1] + b.box[3]) - Math.max(a.box[1], b.box[1]);
    return { commonPx2: width > 0 && height > 0 ? width * height : 0, aPx2: a.areaPx2, bPx2: b.areaPx2 };
  }
  const stepPx = Math.max(a.stepPx, b.stepPx);
  const strideA = stepPx / a.stepPx;
  const strideB = stepPx / b.stepPx;
  const first = Math.ceil(Math.max(a.firstRow / strideA, b.firstRow / strideB));
  const endA = (a.firstRow + a.offsets.length - 1) / strideA;
  const endB = (b.firstRow + b.offsets.length - 1) / strideB;
  const end = Math.min(endA, endB);
  let common = 0;
  const endsA = a.ends;
  const endsB = b.ends;
  for (let row = first; row < end; row++) {
    const rowA = row * strideA - a.firstRow;
    const rowB = row * strideB - b.firstRow;
    let i = a.offsets[rowA]!;
    let j = b.offsets[rowB]!;
    const iEnd = a.offsets[rowA + 1]!;
    const jEnd = b.offsets[rowB + 1]!;
    while (i < iEnd && j < jEnd) {
      const toA = endsA[i + 1]!;
      const toB = endsB[j + 1]!;
      const fromA = endsA[i]!;
      const fromB = endsB[j]!;
      const length = (toA < toB ? toA : toB) - (fromA > fromB ? fromA : fromB);
      if (length > 0) common += length;
      if (toA < toB) i += 2;
      else j += 2;
    }
  }
  return { commonPx2: common * stepPx, aPx2: areaAt(a, strideA), bPx2: areaAt(b, strideB) };
}

/** Area as the rows of a coarser step see it, so that parts and wholes are measured alike. */
function areaAt(spans: Spans, stride: number): number {
  if (stride === 1 && !spans.isBox) return spans.areaPx2;
  let length = 0;
  const rowCount = spans.offsets.length - 1;
  const first = Math.ceil(spans.firstRow / stride) * stride - spans.firstRow;
  for (let row = first; row < rowCount; row += stride) {
    for (let k = spans.offsets[row]!; k < spans.offsets[row + 1]!; k += 2)
      length += spans.ends[k + 1]! - spans.ends[k]!;
  }
  return length * spans.stepPx * stride;
}

/** IoU of two regions, boxes taken as the regions they enclose; 0 when both are empty. */
export function regionIou(a: Spans, b: Spans): number {
  if (a === b) return a.areaPx2 > 0 ? 1 : 0;
  if (!boxesMeet(a.box, b.box)) return 0;
  const { commonPx2, aPx2, bPx2 } = overlapOf(a, b);
  return commonPx2 > 0 ? commonPx2 / (aPx2 + bPx2 - commonPx2) : 0;
}

/**
 * IoU of what two people drew. Where one drew a box and the other an outline, the outline's own bounding
 * box is compared with the box: a perfect box is then no disagreement.
 */
export function drawnIou(a: Spans, b: Spans): number {
  return a.isBox || b.isBox ? boxIou(a.box, b.box) : regionIou(a, b);
}

export function boxesMeet(a: Box, b: Box): boolean {
  return a[0] < b[0] + b[2] && b[0] < a[0] + a[2] && a[1] < b[1] + b[3] && b[1] < a[1] + a[3];
}
