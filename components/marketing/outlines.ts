export type SketchPoint = readonly [x: number, y: number];

export type SketchOutline = {
  station: number;
  /** Stroke dashes, so that the hands differ without colour. */
  dash: string;
  points: readonly SketchPoint[];
  /** IoU with AGREED_OUTLINE, to two decimals; held to the outlines by a test that clips them anew. */
  iou: number;
};

// A bottle on its side, in units of the sketch (640 x 560). The axis runs from the base to the lip.
const BASE: SketchPoint = [196, 372];
const AXIS_LENGTH = 372;
const AXIS_ANGLE = -0.5;
const SAMPLES = 240;

/** Half-widths along the axis: base, body, shoulder, neck, lip. */
const PROFILE: readonly (readonly [along: number, halfWidth: number])[] = [
  [0, 0],
  [0, 44],
  [5, 58],
  [16, 64],
  [60, 66],
  [214, 66],
  [240, 62],
  [262, 50],
  [282, 33],
  [300, 25],
  [338, 23],
  [339, 29],
  [368, 29],
  [372, 24],
  [372, 0],
];

const TRUE_OUTLINE = resample(bottle(), SAMPLES);

/** Five hands: how far each strays from the edge, in sketch units, and at how many points it clicks. */
const HANDS = [
  { station: 1, dash: "none", strayed: stray(2.6, 0.4, 2), clicks: 46, iou: 0.96 },
  { station: 2, dash: "9 3", strayed: stray(4.4, 2.1, -3), clicks: 34, iou: 0.89 },
  { station: 3, dash: "2 3", strayed: stray(4.2, 4.4, 4), clicks: 38, iou: 0.92 },
  { station: 4, dash: "12 3 2 3", strayed: stray(5.6, 1.3, -6), clicks: 28, stopsAt: 306, iou: 0.76 },
  { station: 5, dash: "5 5", strayed: stray(6.4, 3.6, 9), clicks: 24, iou: 0.85 },
] as const;

const DRAWN = HANDS.map((hand) => TRUE_OUTLINE.map((_, index) => drawnPoint(index, hand)));

/** What each of the five drew. */
export const OUTLINES: readonly SketchOutline[] = HANDS.map(({ station, dash, clicks, iou }, index) => ({
  station,
  dash,
  iou,
  points: resample(DRAWN[index] ?? [], clicks),
}));

/** Where they agree: the median of the five at each place along the edge, so that one stray hand moves nothing. */
export const AGREED_OUTLINE: readonly SketchPoint[] = TRUE_OUTLINE.map((_, index) => [
  median(DRAWN.map((points) => points[index]?.[0] ?? 0)),
  median(DRAWN.map((points) => points[index]?.[1] ?? 0)),
]);

/** A closed SVG path through the points, to a tenth of a unit. */
export function closedPath(points: readonly SketchPoint[]): string {
  return `M${points.map(([x, y]) => `${x.toFixed(1)} ${y.toFixed(1)}`).join("L")}Z`;
}

function bottle(): SketchPoint[] {
  const upper = PROFILE.map(([along, halfWidth]) => toSketch(along, -halfWidth));
  const lower = PROFILE.map(([along, halfWidth]) => toSketch(along, halfWidth)).reverse();
  return [...upper, ...lower];
}

function toSketch(along: number, across: number): SketchPoint {
  const [cos, sin] = [Math.cos(AXIS_ANGLE), Math.sin(AXIS_ANGLE)];
  return [BASE[0] + along * cos - across * sin, BASE[1] + along * sin + across * cos];
}

/** A wavering of three slow waves, always the same for the same hand; `bias` is drawing outside (+) or inside. */
function stray(amplitude: number, phase: number, bias: number): (turn: number) => number {
  return (turn) =>
    bias +
    amplitude *
      (Math.sin(2 * turn + phase) +
        0.7 * Math.sin(5 * turn + 2.3 * phase) +
        0.5 * Math.sin(11 * turn + 3.1 * phase));
}

type Hand = { strayed: (turn: number) => number; stopsAt?: number };

function drawnPoint(index: number, { strayed, stopsAt }: Hand): SketchPoint {
  const before = at(TRUE_OUTLINE, index - 2);
  const after = at(TRUE_OUTLINE, index + 2);
  const [x, y] = at(TRUE_OUTLINE, index);
  const length = Math.hypot(after[0] - before[0], after[1] - before[1]) || 1;
  const offset = strayed((index / SAMPLES) * 2 * Math.PI);
  const moved: SketchPoint = [
    x + (offset * (after[1] - before[1])) / length,
    y - (offset * (after[0] - before[0])) / length,
  ];
  return stopsAt === undefined ? moved : stopShort(moved, stopsAt);
}

/** A hand that took the neck for sand: nothing beyond `along` on the axis. */
function stopShort([x, y]: SketchPoint, along: number): SketchPoint {
  const [cos, sin] = [Math.cos(AXIS_ANGLE), Math.sin(AXIS_ANGLE)];
  const [dx, dy] = [x - BASE[0], y - BASE[1]];
  const reached = dx * cos + dy * sin;
  return reached <= along ? [x, y] : toSketch(along, -dx * sin + dy * cos);
}

/** `count` points at equal steps along a closed line. */
function resample(points: readonly SketchPoint[], count: number): SketchPoint[] {
  const steps = points.map((point, index) => distance(point, at(points, index + 1)));
  const perimeter = steps.reduce((sum, step) => sum + step, 0);
  const result: SketchPoint[] = [];
  let edge = 0;
  let walked = 0;
  for (let index = 0; index < count; index++) {
    const goal = (index / count) * perimeter;
    while (walked + (steps[edge] ?? 0) < goal) {
      walked += steps[edge] ?? 0;
      edge++;
    }
    const share = steps[edge] ? (goal - walked) / (steps[edge] ?? 1) : 0;
    const [from, to] = [at(points, edge), at(points, edge + 1)];
    result.push([from[0] + share * (to[0] - from[0]), from[1] + share * (to[1] - from[1])]);
  }
  return result;
}

function at(points: readonly SketchPoint[], index: number): SketchPoint {
  return points[(index + points.length) % points.length] ?? [0, 0];
}

function distance(from: SketchPoint, to: SketchPoint): number {
  return Math.hypot(to[0] - from[0], to[1] - from[1]);
}

function median(values: readonly number[]): number {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted[Math.floor(sorted.length / 2)] ?? 0;
}

/** Length of the bottle along its axis, for the scale of the sketch. */
export const SKETCH_AXIS = { from: BASE, to: toSketch(AXIS_LENGTH, 0) } as const;
