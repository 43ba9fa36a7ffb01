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
  readonly withoutIou: ReadonlyMap<number, number>;
};

/** Blur of the vote, as a share of the object's size (square root of area); tuned by bench:consensus. */
export const TUNING = { blurShare: 0.04, boxWeight: 0.3, robust: 0, blurMax: 6 };

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
  return withRectanglesAsBoxes(drawings);
}

/**
 * Somebody whose outline fills its own bounding box, where most others drew something else, drew a box with the
 * outline's tool: it says where the object ends and nothing of its form. Where most are rectangles, the object is one.
 */
function withRectanglesAsBoxes(drawings: Drawing[]): Drawing[] {
  const outlines = drawings.filter(({ isBox }) => !isBox);
  const rectangles = outlines.filter(isRectangle);
  if (rectangles.length === 0 || 2 * rectangles.length >= outlines.length) return drawings;
  return drawings.map((drawing) => (rectangles.includes(drawing) ? { ...drawing, isBox: true } : drawing));
}

/** Share of its bounding box from which an outline is a rectangle: four corners set by hand keep so much. */
const RECTANGLE_FILL_MIN = 0.98;

function isRectangle({ pieces, box }: Drawing): boolean {
  return pieces.length === 1 && (pieces[0]?.areaPx2 ?? 0) >= RECTANGLE_FILL_MIN * box[2] * box[3];
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
    withoutIou: new Map(
      drawings.map((own) => {
        const others = drawings.filter(({ voter }) => voter !== own.voter);
        return [own.annotator, others.length > 0 ? boxIou(own.box, medianBox(others)) : NaN];
      }),
    ),
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
  const coarsest = Math.max(...drawings.flatMap(({ pieces }) => pieces.map(({ stepPx }) => stepPx)));
  const grid = gridFor(frame, coarsest);
  const nodes = grid.columns * grid.rows;
  const coverage = drawings.map((drawing, slot) => {
    const cover = scratch(slot, nodes);
    for (const spans of drawing.pieces) addCoverage(grid, spans, cover);
    if (drawing.pieces.length > 1) for (let k = 0; k < nodes; k++) if (cover[k]! > 1) cover[k] = 1;
    return cover;
  });
  const weights = memberWeights(drawings, outlines, coverage, nodes, settings);
  const sum = weightedSum(drawings, weights, coverage, nodes);
  const field = voteField(grid, drawings, weights, coverage, sum, settings, candidate, image);
  const area = countInside(field);
  let rings = contours(grid, field, 0.5);
  let shape: Shape;
  let spans: Spans;
  if (rings.length === 0) {
    // So scattered that no pixel has a majority: the outline that resembles the others most stands for all.
    const medoid = image.items[candidate.medoid]!;
    shape = medoid.instance.shape;
    spans = medoid.spans;
  } else {
    rings = simplify(rings, settings.outlineIouLossMax * area * grid.cellPx * grid.cellPx);
    shape = { kind: "polygon", rings };
    spans = spansOf(shape);
  }
  const iouOf = new Map<number, number>();
  for (const drawing of drawings) {
    const single = drawing.pieces.length === 1 ? drawing.pieces[0]! : undefined;
    iouOf.set(
      drawing.annotator,
      drawing.isBox || !single ? boxIou(drawing.box, spans.box) : regionIou(single, spans),
    );
  }
  return { shape, box: spans.box, iouOf, withoutIou: iousWithout(grid, drawings, weights, coverage, sum) };
}

/**
 * Work arrays, kept between calls: an image needs a few per object, and clearing is cheaper than collecting.
 * Slot k is valid until fuse asks for it again; nothing of it leaves this module.
 */
const scratchArrays: Float32Array[] = [];

function scratch(slot: number, length: number): Float32Array {
  let array = scratchArrays[slot];
  if (!array || array.length < length) array = scratchArrays[slot] = new Float32Array(2 * length);
  const part = array.subarray(0, length);
  part.fill(0);
  return part;
}

/** Weight of each drawing: trust in the person, lowered for an outline that the others do not bear out. */
function memberWeights(
  drawings: readonly Drawing[],
  outlines: readonly Drawing[],
  coverage: readonly Float32Array[],
  nodes: number,
  settings: ConsensusSettings,
): number[] {
  const weights = drawings.map(({ weight }) => weight);
  if (settings.fusion !== "weighted" || outlines.length < 3 || TUNING.robust <= 0) return weights;
  const slots = drawings.map((_, slot) => slot).filter((slot) => !drawings[slot]!.isBox);
  const field = scratch(drawings.length, nodes);
  let total = 0;
  for (const slot of slots) {
    add(field, coverage[slot]!, weights[slot]!);
    total += weights[slot]!;
  }
  const losses = slots.map((slot) => {
    const weight = weights[slot]!;
    const { common, mine, theirs } = overlapWithRest(coverage[slot]!, field, weight, (total - weight) / 2);
    return 1 - common / Math.max(1e-9, mine + theirs - common);
  });
  const typical = Math.max(0.03, [...losses].sort((a, b) => a - b)[(losses.length - 1) >> 1]!);
  slots.forEach((slot, k) => {
    const excess = losses[k]! / typical;
    weights[slot]! /= 1 + Math.max(0, excess - 1) * TUNING.robust;
  });
  return weights;
}

function add(field: Float32Array, cover: Float32Array, weight: number): void {
  for (let k = 0; k < field.length; k++) field[k]! += weight * cover[k]!;
}

/** The outlines' coverages, each times its weight: what votes and scores are both made from. */
type WeightedSum = { field: Float32Array; weight: number };

function weightedSum(
  drawings: readonly Drawing[],
  weights: readonly number[],
  coverage: readonly Float32Array[],
  nodes: number,
): WeightedSum {
  const field = scratch(drawings.length + 3, nodes);
  let weight = 0;
  drawings.forEach(({ isBox }, slot) => {
    if (isBox) return;
    add(field, coverage[slot]!, weights[slot]!);
    weight += weights[slot]!;
  });
  return { field, weight };
}

function voteField(
  grid: Grid,
  drawings: readonly Drawing[],
  weights: readonly number[],
  coverage: readonly Float32Array[],
  sum: WeightedSum,
  settings: ConsensusSettings,
  candidate: Candidate,
  image: PreparedImage,
): Float32Array {
  const nodes = grid.columns * grid.rows;
  const slots = drawings.map((_, slot) => slot).filter((slot) => !drawings[slot]!.isBox);
  const field = scratch(drawings.length + 1, nodes);
  if (settings.fusion === "medoid") {
    const medoid = image.items[candidate.medoid]!.annotator;
    field.set(coverage[slots.find((slot) => drawings[slot]!.annotator === medoid) ?? slots[0]!]!);
    return field;
  }
  if (settings.fusion === "staple" && slots.length >= 2) {
    const masks = slots.map((slot) => Uint8Array.from(coverage[slot]!, (c) => Number(c >= 0.5)));
    field.set(staple(masks, { iterationsMax: 100, toleranceMax: 1e-6 }).probability);
    return field;
  }
  if (settings.fusion === "majority") {
    for (const slot of slots) add(field, coverage[slot]!, 1 / slots.length);
    return field;
  }
  const inside = shareInto(field, drawings, weights, coverage, sum);
  const radius = Math.min(TUNING.blurMax, Math.round(TUNING.blurShare * Math.sqrt(inside)));
  if (radius >= 1) blur(grid, field, radius);
  return field;
}

/**
 * Weighted mean of the coverages; boxes pull down what lies outside them and say little about the inside. Returns how
 * many nodes have a majority.
 */
function shareInto(
  field: Float32Array,
  drawings: readonly Drawing[],
  weights: readonly number[],
  coverage: readonly Float32Array[],
  sum: WeightedSum,
): number {
  const outlines = sum.weight;
  const all = sum.field;
  let inside = 0;
  for (let k = 0; k < field.length; k++) {
    const share = all[k]! / outlines;
    field[k] = share;
    if (share >= 0.5) inside++;
  }
  if (drawings.every(({ isBox }) => !isBox)) return inside;
  let total = outlines;
  drawings.forEach(({ isBox }, slot) => {
    if (isBox) total += TUNING.boxWeight * weights[slot]!;
  });
  const factor = scratch(drawings.length + 2, field.length);
  factor.fill(outlines / total);
  drawings.forEach(({ isBox }, slot) => {
    // Inside, a box votes as the outlines do; outside, against.
    if (isBox) add(factor, coverage[slot]!, (TUNING.boxWeight * weights[slot]!) / total);
  });
  for (let k = 0; k < field.length; k++) field[k]! *= factor[k]!;
  return countInside(field);
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

/**
 * IoU of each drawing with the plain weighted majority of the others (nobody who copies the same source), box against
 * box where either side is boxes. One pass a drawing: the others are the total less the own.
 */
function iousWithout(
  grid: Grid,
  drawings: readonly Drawing[],
  weights: readonly number[],
  coverage: readonly Float32Array[],
  { field, weight: total }: WeightedSum,
): Map<number, number> {
  const result = new Map<number, number>();
  drawings.forEach((own, slot) => {
    const others = drawings.filter(({ voter }) => voter !== own.voter);
    if (others.length === 0) return result.set(own.annotator, NaN);
    if (others.every(({ isBox }) => isBox))
      return result.set(own.annotator, boxIou(own.box, medianBox(others)));
    let rest = field;
    let level = total;
    const group = drawings.map((_, other) => other).filter((other) => drawings[other]!.voter === own.voter);
    const out = group.filter((other) => !drawings[other]!.isBox);
    for (const other of out) level -= weights[other]!;
    if (out.length > 1) {
      rest = scratch(drawings.length + 2, field.length);
      rest.set(field);
      for (const other of out) if (other !== slot) add(rest, coverage[other]!, -weights[other]!);
    }
    const weight = own.isBox ? 0 : weights[slot]!;
    const { common, mine, theirs } = overlapWithRest(coverage[slot]!, rest, weight, level / 2);
    if (theirs === 0) return result.set(own.annotator, 0);
    if (!own.isBox) return result.set(own.annotator, common / (mine + theirs - common));
    const box = boxOfRest(grid, rest, level / 2);
    return result.set(own.annotator, boxIou(own.box, box));
  });
  return result;
}

type OverlapWithRest = { common: number; mine: number; theirs: number };

/** In nodes: the own drawing, where `rest` less `weight` times the own reaches `level`, and what they share. */
function overlapWithRest(
  cover: Float32Array,
  rest: Float32Array,
  weight: number,
  level: number,
): OverlapWithRest {
  let common = 0;
  let mine = 0;
  let theirs = 0;
  for (let k = 0; k < cover.length; k++) {
    const all = rest[k]!;
    const c = cover[k]!;
    mine += c;
    if (all > 0 && all - weight * c >= level) {
      theirs++;
      common += c;
    }
  }
  return { common, mine, theirs };
}

function boxOfRest(grid: Grid, rest: Float32Array, level: number): Box {
  const { columns, rows, cellPx, firstColumn, firstRow } = grid;
  let [minColumn, maxColumn, minRow, maxRow] = [columns, -1, rows, -1];
  for (let row = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++) {
      const all = rest[row * columns + column]!;
      if (all <= 0 || all < level) continue;
      minColumn = Math.min(minColumn, column);
      maxColumn = Math.max(maxColumn, column);
      minRow = Math.min(minRow, row);
      maxRow = row;
    }
  }
  return [
    (minColumn + firstColumn) * cellPx,
    (minRow + firstRow) * cellPx,
    (maxColumn - minColumn + 1) * cellPx,
    (maxRow - minRow + 1) * cellPx,
  ];
}
