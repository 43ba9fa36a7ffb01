import type { Box, Shape } from "@/lib/geometry/types";
import type { Candidate } from "./candidates";
import { contours, simplify } from "./contour";
import { addCoverage, gridFor, type Grid } from "./field";
import type { PreparedImage } from "./prepare";
import { boxIou, regionIou, spansOf, type Spans } from "./spans";
import { staple } from "./staple";
import type { ConsensusSettings, Reliability } from "./types";

/** One annotator's drawing of one object: the member and, where drawn in pieces, its parts. */
type Drawing = {
  annotator: number;
  voter: number;
  pieces: readonly Spans[];
  box: Box;
  isBox: boolean;
  weight: number;
};

export type Fused = {
  readonly shape: Shape;
  readonly box: Box;
  /** IoU of each contributing annotator's drawing with the shape. */
  readonly iouOf: ReadonlyMap<number, number>;
  /** IoU of an annotator's drawing with what others (no copies of it) alone give; NaN when nobody else drew it. */
  withoutIou(annotator: number): number;
};

/** Blur of the vote, as a share of the object's size (square root of area); tuned by bench:consensus. */
export const TUNING = { blurShare: 0.03, boxWeight: 0.3, robust: 2, blurMax: 6 };

/**
 * One shape from all who drew the object. Outlines: the weighted majority of pixels, its edges softened so that
 * two different outlines meet half-way, then traced and thinned within the stated loss of IoU. Boxes, or a
 * class kept as boxes: the weighted median of each side. Boxes among outlines only say where the object ends.
 * Weights come from the reliability; people who copy each other share one. O(members x nodes).
 */
export function fuse(
  image: PreparedImage,
  candidate: Candidate,
  classId: string,
  settings: ConsensusSettings,
  reliability: Reliability | undefined,
): Fused {
  const drawings = drawingsOf(image, candidate, reliability, settings);
  const outlines = drawings.filter((drawing) => !drawing.isBox);
  if (outlines.length === 0 || settings.boxClasses.includes(classId)) return fuseBoxes(drawings);
  return fuseOutlines(drawings, outlines, settings, candidate, image);
}

function drawingsOf(
  image: PreparedImage,
  candidate: Candidate,
  reliability: Reliability | undefined,
  settings: ConsensusSettings,
): Drawing[] {
  const pieces = new Map<number, Spans[]>();
  const medoid = image.items[candidate.medoid]!.spans;
  for (const item of candidate.members) pieces.set(image.items[item]!.annotator, [image.items[item]!.spans]);
  for (const item of candidate.parts) {
    const { annotator, spans } = image.items[item]!;
    pieces.set(annotator, [...(pieces.get(annotator) ?? []), spans]);
  }
  const sharers = new Map<number, number>();
  for (const annotator of pieces.keys()) {
    const voter = image.voterOf[annotator]!;
    sharers.set(voter, (sharers.get(voter) ?? 0) + 1);
  }
  const drawings: Drawing[] = [];
  for (const [annotator, list] of [...pieces].sort(([a], [b]) => a - b)) {
    const box = unionBox(list.map(({ box: piece }) => piece));
    // Pieces that do not add up to the object would only bite into its outline.
    if (list.length !== 1 || !candidate.members.some((item) => image.items[item]!.annotator === annotator)) {
      if (boxIou(box, medoid.box) < 0.5) continue;
    }
    const trust =
      settings.fusion === "weighted" && reliability
        ? (reliability.annotators[image.annotatorIds[annotator]!]?.outlineWeight ?? 1)
        : 1;
    const weight = trust / sharers.get(image.voterOf[annotator]!)!;
    drawings.push({
      annotator,
      voter: image.voterOf[annotator]!,
      pieces: list,
      box,
      isBox: list.every(({ isBox }) => isBox),
      weight,
    });
  }
  return drawings;
}

export function unionBox(boxes: readonly Box[]): Box {
  let [minX, minY, maxX, maxY] = [Infinity, Infinity, -Infinity, -Infinity];
  for (const [x, y, width, height] of boxes) {
    minX = Math.min(minX, x);
    minY = Math.min(minY, y);
    maxX = Math.max(maxX, x + width);
    maxY = Math.max(maxY, y + height);
  }
  return [minX, minY, maxX - minX, maxY - minY];
}

/** Where half of the weight lies on either side; between two values when it is split evenly. */
export function weightedMedian(values: readonly number[], weights: readonly number[]): number {
  const order = values.map((_, i) => i).sort((a, b) => values[a]! - values[b]!);
  const half = weights.reduce((sum, weight) => sum + weight, 0) / 2;
  let passed = 0;
  for (let k = 0; k < order.length; k++) {
    passed += weights[order[k]!]!;
    if (Math.abs(passed - half) <= 1e-9 * half && k + 1 < order.length) {
      return (values[order[k]!]! + values[order[k + 1]!]!) / 2;
    }
    if (passed > half) return values[order[k]!]!;
  }
  return values[order[order.length - 1]!]!;
}

function medianBox(drawings: readonly Drawing[]): Box {
  const weights = drawings.map(({ weight }) => weight);
  const side = (of: (box: Box) => number) =>
    weightedMedian(
      drawings.map(({ box }) => of(box)),
      weights,
    );
  const x = side((box) => box[0]);
  const y = side((box) => box[1]);
  return [x, y, side((box) => box[0] + box[2]) - x, side((box) => box[1] + box[3]) - y];
}

function fuseBoxes(drawings: readonly Drawing[]): Fused {
  const box = medianBox(drawings);
  return {
    shape: { kind: "box", box },
    box,
    iouOf: new Map(drawings.map((drawing) => [drawing.annotator, boxIou(drawing.box, box)])),
    withoutIou(annotator) {
      const own = drawings.find((drawing) => drawing.annotator === annotator);
      const others = drawings.filter(({ voter }) => voter !== own?.voter);
      return own && others.length > 0 ? boxIou(own.box, medianBox(others)) : NaN;
    },
  };
}

function fuseOutlines(
  drawings: readonly Drawing[],
  outlines: readonly Drawing[],
  settings: ConsensusSettings,
  candidate: Candidate,
  image: PreparedImage,
): Fused {
  const frame = unionBox(drawings.map(({ box }) => box));
  const grid = gridFor(
    frame,
    Math.max(...drawings.flatMap(({ pieces }) => pieces.map(({ stepPx }) => stepPx))),
  );
  const nodes = grid.columns * grid.rows;
  const coverage = new Map<number, Float32Array>();
  for (const drawing of drawings) {
    const cover = new Float32Array(nodes);
    for (const spans of drawing.pieces) addCoverage(grid, spans, cover);
    if (drawing.pieces.length > 1) for (let k = 0; k < nodes; k++) if (cover[k]! > 1) cover[k] = 1;
    coverage.set(drawing.annotator, cover);
  }
  const weightOf = memberWeights(outlines, coverage, nodes, settings);
  const field = voteField(grid, drawings, weightOf, coverage, settings, candidate, image);
  const area = countInside(field);
  let rings = contours(grid, field, 0.5);
  if (rings.length === 0) {
    // So scattered that no pixel has a majority: the outline that resembles the others most stands for all.
    const medoid = image.items[candidate.medoid]!;
    const shape = medoid.instance.shape;
    return asFused(shape, medoid.spans, drawings, () => NaN);
  }
  rings = simplify(rings, settings.outlineIouLossMax * area * grid.cellPx * grid.cellPx);
  const shape: Shape = { kind: "polygon", rings };
  return asFused(shape, spansOf(shape), drawings, (annotator) => {
    const own = drawings.find((drawing) => drawing.annotator === annotator);
    const others = drawings.filter(({ voter }) => voter !== own?.voter);
    if (!own || others.length === 0) return NaN;
    if (others.every(({ isBox }) => isBox)) return boxIou(own.box, medianBox(others));
    return iouWithMask(
      grid,
      own,
      coverage.get(annotator)!,
      voteFieldPlain(others, weightOf, coverage, nodes),
    );
  });
}

function asFused(
  shape: Shape,
  spans: Spans,
  drawings: readonly Drawing[],
  withoutIou: (annotator: number) => number,
): Fused {
  const iouOf = new Map<number, number>();
  for (const drawing of drawings) {
    const single = drawing.pieces.length === 1 ? drawing.pieces[0]! : undefined;
    const iou = drawing.isBox || !single ? boxIou(drawing.box, spans.box) : regionIou(single, spans);
    iouOf.set(drawing.annotator, iou);
  }
  return { shape, box: spans.box, iouOf, withoutIou };
}

/** Weight of each outline: trust in the person, lowered for an outline that the others do not bear out. */
function memberWeights(
  outlines: readonly Drawing[],
  coverage: ReadonlyMap<number, Float32Array>,
  nodes: number,
  settings: ConsensusSettings,
): Map<number, number> {
  const weights = new Map(outlines.map(({ annotator, weight }) => [annotator, weight]));
  if (settings.fusion !== "weighted" || outlines.length < 3 || TUNING.robust <= 0) return weights;
  const field = new Float32Array(nodes);
  let total = 0;
  for (const { annotator, weight } of outlines) {
    const cover = coverage.get(annotator)!;
    for (let k = 0; k < nodes; k++) field[k]! += weight * cover[k]!;
    total += weight;
  }
  const losses = outlines.map(({ annotator, weight }) => {
    const cover = coverage.get(annotator)!;
    const level = (total - weight) / 2;
    let common = 0;
    let own = 0;
    let others = 0;
    for (let k = 0; k < nodes; k++) {
      const c = cover[k]!;
      own += c;
      if (field[k]! - weight * c > level) {
        others += 1;
        common += c;
      }
    }
    return 1 - common / Math.max(1e-9, own + others - common);
  });
  const typical = Math.max(0.03, [...losses].sort((a, b) => a - b)[(losses.length - 1) >> 1]!);
  outlines.forEach(({ annotator, weight }, k) => {
    const excess = losses[k]! / typical;
    weights.set(annotator, weight / (1 + Math.max(0, excess - 1) * TUNING.robust));
  });
  return weights;
}

function voteField(
  grid: Grid,
  drawings: readonly Drawing[],
  weightOf: ReadonlyMap<number, number>,
  coverage: ReadonlyMap<number, Float32Array>,
  settings: ConsensusSettings,
  candidate: Candidate,
  image: PreparedImage,
): Float32Array {
  const nodes = grid.columns * grid.rows;
  const outlines = drawings.filter(({ isBox }) => !isBox);
  if (settings.fusion === "medoid") {
    const medoid = image.items[candidate.medoid]!;
    const drawing = drawings.find(({ annotator }) => annotator === medoid.annotator) ?? outlines[0]!;
    return coverage.get(drawing.isBox ? outlines[0]!.annotator : drawing.annotator)!.slice();
  }
  if (settings.fusion === "staple" && outlines.length >= 2) {
    const masks = outlines.map(({ annotator }) =>
      Uint8Array.from(coverage.get(annotator)!, (c) => Number(c >= 0.5)),
    );
    return Float32Array.from(staple(masks, { iterationsMax: 100, toleranceMax: 1e-6 }).probability);
  }
  if (settings.fusion === "majority") {
    const equal = new Map(outlines.map(({ annotator }) => [annotator, 1]));
    return voteFieldPlain(outlines, equal, coverage, nodes);
  }
  const field = voteFieldPlain(drawings, weightOf, coverage, nodes);
  const radius = Math.min(TUNING.blurMax, Math.round(TUNING.blurShare * Math.sqrt(countInside(field))));
  if (radius >= 1) blur(grid, field, radius);
  return field;
}

/** Weighted mean of the coverages; boxes pull down what lies outside them and say little about the inside. */
function voteFieldPlain(
  drawings: readonly Drawing[],
  weightOf: ReadonlyMap<number, number>,
  coverage: ReadonlyMap<number, Float32Array>,
  nodes: number,
): Float32Array {
  const field = new Float32Array(nodes);
  let total = 0;
  for (const { annotator, isBox } of drawings) {
    if (isBox) continue;
    const weight = weightOf.get(annotator) ?? 1;
    const cover = coverage.get(annotator)!;
    for (let k = 0; k < nodes; k++) field[k]! += weight * cover[k]!;
    total += weight;
  }
  for (const { annotator, isBox, weight } of drawings) {
    if (!isBox || TUNING.boxWeight <= 0) continue;
    const pull = weight * TUNING.boxWeight;
    const cover = coverage.get(annotator)!;
    // Inside, the box votes as the others do; outside, against.
    for (let k = 0; k < nodes; k++) field[k]! += pull * cover[k]! * (field[k]! / total);
    total += pull;
  }
  for (let k = 0; k < nodes; k++) field[k]! /= total;
  return field;
}

function countInside(field: Float32Array): number {
  let count = 0;
  for (let k = 0; k < field.length; k++) if (field[k]! >= 0.5) count++;
  return count;
}

/** Two passes of a moving mean over 2 radius + 1 nodes, rows then columns; the margin stays empty enough to close. */
function blur(grid: Grid, field: Float32Array, radius: number): void {
  const { columns, rows } = grid;
  const line = new Float32Array(Math.max(columns, rows));
  const width = 2 * radius + 1;
  const pass = (base: number, stride: number, count: number) => {
    let sum = 0;
    for (let k = 0; k < count; k++) line[k] = field[base + k * stride]!;
    for (let k = 0; k < Math.min(radius, count); k++) sum += line[k]!;
    for (let k = 0; k < count; k++) {
      if (k + radius < count) sum += line[k + radius]!;
      field[base + k * stride] = sum / width;
      if (k - radius >= 0) sum -= line[k - radius]!;
    }
  };
  for (let row = 0; row < rows; row++) pass(row * columns, 1, columns);
  for (let column = 0; column < columns; column++) pass(column, columns, rows);
  for (let column = 0; column < columns; column++) field[column] = field[(rows - 1) * columns + column] = 0;
  for (let row = 0; row < rows; row++) field[row * columns] = field[row * columns + columns - 1] = 0;
}

function iouWithMask(grid: Grid, own: Drawing, cover: Float32Array, field: Float32Array): number {
  const { columns, rows, cellPx, firstColumn, firstRow } = grid;
  let common = 0;
  let mine = 0;
  let theirs = 0;
  let [minColumn, maxColumn, minRow, maxRow] = [columns, -1, rows, -1];
  for (let row = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++) {
      const k = row * columns + column;
      const c = cover[k]!;
      mine += c;
      if (field[k]! < 0.5) continue;
      theirs++;
      common += c;
      if (column < minColumn) minColumn = column;
      if (column > maxColumn) maxColumn = column;
      if (row < minRow) minRow = row;
      if (row > maxRow) maxRow = row;
    }
  }
  if (theirs === 0) return 0;
  if (!own.isBox) return common / (mine + theirs - common);
  const box: Box = [
    (minColumn + firstColumn) * cellPx,
    (minRow + firstRow) * cellPx,
    (maxColumn - minColumn + 1) * cellPx,
    (maxRow - minRow + 1) * cellPx,
  ];
  return boxIou(own.box, box);
}
