import type { DeskClass, DeskInstance } from "@/lib/contracts/desk";
import type { Box, Point, Ring, Shape } from "@/lib/geometry/types";
import type { Command } from "./document";
import type { Hit } from "./hit";
import {
  bounds,
  boxBetween,
  corners,
  fromExtremes,
  inside,
  insertVertex,
  moveShape,
  moveSide,
  problemOfRings,
  removeVertex,
  replaceVertex,
  simplifyStretch,
  withoutRepeats,
  type RingProblem,
  type Size,
} from "./shapes";

/**
 * The one modeless tool: what the pointer does decides what is drawn. Press and drag on open ground makes a
 * box; clicks set the points of an outline; a drag between clicks adds a freehand stretch. On the selected
 * shape a vertex, an edge or the body can be dragged. Pure and total: events in, state and commands out.
 *
 * Extreme points are clicks like any others, so nothing has to be chosen before: in a class of boxes the fourth
 * click ends the box by itself, and in a class of outlines one key says that the four were the extremes.
 */
export type ToolState =
  | { mode: "idle" }
  | { mode: "pressing"; start: Point; hit: Hit }
  | { mode: "boxing"; start: Point; cursor: Point }
  | { mode: "plotting"; points: readonly Point[]; cursor: Point }
  | { mode: "plotting-press"; points: readonly Point[]; start: Point; stretch: readonly Point[] }
  | { mode: "shaping"; id: string; grip: Grip; original: DeskInstance; shape: Shape };

/** What is held: a vertex of an outline or corner of a box, a side of a box, or the whole shape. */
export type Grip =
  | { kind: "vertex"; ring: number; vertex: number }
  | { kind: "side"; side: number }
  | { kind: "body"; start: Point };

export type ToolEvent =
  | { type: "down"; at: Point; hit: Hit }
  | { type: "move"; at: Point }
  | { type: "up"; at: Point }
  | { type: "double"; at: Point }
  | { type: "finish" }
  | { type: "extremes" }
  | { type: "back" }
  | { type: "cancel" }
  /** The hand turned to something else (a second finger): the press is dropped, points already set stay. */
  | { type: "interrupt" }
  | { type: "delete-vertex"; hit: Hit };

export type ToolContext = {
  size: Size;
  /** A click's slop, in image px at the present zoom. */
  slop: number;
  selectedId: string | null;
  find: (id: string) => DeskInstance | undefined;
  newId: () => string;
  currentClass: DeskClass;
};

export type ToolStep = {
  state: ToolState;
  command?: Command;
  /** undefined leaves the selection as it is. */
  select?: string | null;
  problem?: RingProblem;
  /** A shape that was refused for its problem, so that it can be mended. */
  refused?: { id: string; shape: Shape };
  /** The extreme points of what was added, seeds of a better outline. */
  extremes?: readonly Point[];
};

export const IDLE: ToolState = { mode: "idle" };

/** Shares of a click's slop. */
const REPEAT = 0.25; // nearer than this, two points are one
const CLOSING = 1.5; // so near to the first point, a click closes the outline
const STRETCH = 0.3; // a freehand stretch is recorded this finely
const STRETCH_TOLERANCE = 0.15; // and then kept to this tolerance: about a screen px with a mouse

const far = (a: Point, b: Point, than: number) => Math.hypot(a[0] - b[0], a[1] - b[1]) > than;

export function step(state: ToolState, event: ToolEvent, context: ToolContext): ToolStep {
  if (event.type === "cancel") return { state: IDLE };
  if (event.type === "interrupt") return { state: interrupted(state) };
  switch (state.mode) {
    case "idle":
      return fromIdle(event, context);
    case "pressing":
      return fromPressing(state, event, context);
    case "boxing":
      if (event.type === "move") return { state: { ...state, cursor: inside(event.at, context.size) } };
      return event.type === "up" ? finishBox(state.start, event.at, context) : { state };
    case "plotting":
      return fromPlotting(state, event, context);
    case "plotting-press":
      return fromPlottingPress(state, event, context);
    case "shaping":
      return fromShaping(state, event, context);
  }
}

function interrupted(state: ToolState): ToolState {
  if (state.mode === "plotting") return state;
  if (state.mode !== "plotting-press") return IDLE;
  return { mode: "plotting", points: state.points, cursor: state.points.at(-1) ?? state.start };
}

function fromIdle(event: ToolEvent, context: ToolContext): ToolStep {
  if (event.type === "down") {
    return { state: { mode: "pressing", start: inside(event.at, context.size), hit: event.hit } };
  }
  if (event.type === "delete-vertex") return deleteVertex(event.hit, context);
  return { state: IDLE };
}

function deleteVertex(hit: Hit, { find }: ToolContext): ToolStep {
  if (hit.part !== "vertex") return { state: IDLE };
  const instance = find(hit.id);
  if (!instance || instance.shape.kind !== "polygon") return { state: IDLE };
  const rings = removeVertex(instance.shape.rings, hit.ring, hit.vertex);
  if (!rings) return { state: IDLE, command: { type: "remove", id: hit.id }, select: null };
  return reshaped(instance, { kind: "polygon", rings });
}

function fromPressing(
  state: Extract<ToolState, { mode: "pressing" }>,
  event: ToolEvent,
  context: ToolContext,
): ToolStep {
  const { hit, start } = state;
  if (event.type === "move") {
    if (!far(event.at, start, context.slop)) return { state };
    const held = hold(hit, start, context);
    if (held) return fromShaping(held, event, context);
    return { state: { mode: "boxing", start, cursor: inside(event.at, context.size) } };
  }
  if (event.type !== "up") return { state };
  // A press that did not move: a click. On a shape it selects; on open ground it sets the first point.
  if (hit.part !== "ground") return { state: IDLE, select: hit.id };
  return { state: { mode: "plotting", points: [start], cursor: start }, select: null };
}

/** What a drag from this hit takes hold of on the selected shape: a vertex, a new vertex, a side or all of it. */
function hold(
  hit: Hit,
  start: Point,
  { selectedId, find }: ToolContext,
): Extract<ToolState, { mode: "shaping" }> | undefined {
  if (hit.part === "ground" || hit.id !== selectedId) return undefined;
  const original = find(hit.id);
  if (!original) return undefined;
  const { shape } = original;
  const holding = (grip: Grip, held = shape) =>
    ({ mode: "shaping", id: original.id, grip, original, shape: held }) as const;
  if (hit.part === "body") return holding({ kind: "body", start });
  if (hit.part === "vertex") return holding({ kind: "vertex", ring: hit.ring, vertex: hit.vertex });
  if (shape.kind === "box") return holding({ kind: "side", side: hit.vertex });
  const rings = insertVertex(shape.rings, hit.ring, hit.vertex, hit.at);
  return holding({ kind: "vertex", ring: hit.ring, vertex: hit.vertex + 1 }, { kind: "polygon", rings });
}

function fromShaping(
  state: Extract<ToolState, { mode: "shaping" }>,
  event: ToolEvent,
  context: ToolContext,
): ToolStep {
  if (event.type !== "move" && event.type !== "up") return { state };
  const shape = reshape(state, inside(event.at, context.size), context.size) ?? state.shape;
  return event.type === "move" ? { state: { ...state, shape } } : reshaped(state.original, shape);
}

/** Ends a change of shape: refused, and handed back for mending, when it would be no valid outline. */
function reshaped(instance: DeskInstance, shape: Shape): ToolStep {
  const problem = shape.kind === "polygon" ? problemOfRings(shape.rings) : undefined;
  if (problem) return { state: IDLE, problem, refused: { id: instance.id, shape } };
  return { state: IDLE, command: { type: "change", id: instance.id, to: changed(instance, shape) } };
}

function reshape(
  { grip, original, shape }: Extract<ToolState, { mode: "shaping" }>,
  at: Point,
  size: Size,
): Shape | undefined {
  if (grip.kind === "body") {
    return moveShape(original.shape, at[0] - grip.start[0], at[1] - grip.start[1], size);
  }
  if (shape.kind === "polygon") {
    if (grip.kind === "side") return undefined;
    return { kind: "polygon", rings: replaceVertex(shape.rings, grip.ring, grip.vertex, at) };
  }
  if (original.shape.kind !== "box") return undefined;
  const opposite = grip.kind === "vertex" ? corners(original.shape.box)[(grip.vertex + 2) % 4] : undefined;
  const box =
    grip.kind === "side"
      ? moveSide(original.shape.box, grip.side, at, size)
      : opposite && boxBetween(at, opposite, size);
  return box && { kind: "box", box };
}

function fromPlotting(
  state: Extract<ToolState, { mode: "plotting" }>,
  event: ToolEvent,
  context: ToolContext,
): ToolStep {
  switch (event.type) {
    case "move":
      return { state: { ...state, cursor: inside(event.at, context.size) } };
    case "down": {
      const start = inside(event.at, context.size);
      return { state: { mode: "plotting-press", points: state.points, start, stretch: [] } };
    }
    case "finish":
    case "double":
      return finishOutline(state.points, context);
    case "extremes":
      return finishExtremes(state.points, context);
    case "back":
      return state.points.length <= 1
        ? { state: IDLE }
        : { state: { ...state, points: state.points.slice(0, -1) } };
    default:
      return { state };
  }
}

function fromPlottingPress(
  state: Extract<ToolState, { mode: "plotting-press" }>,
  event: ToolEvent,
  context: ToolContext,
): ToolStep {
  const [first] = state.points;
  const isClosing = (at: Point) => first !== undefined && !far(at, first, context.slop * CLOSING);
  if (event.type === "move") {
    const at = inside(event.at, context.size);
    // The first step must leave the click's slop; then the hand is drawing, and each bend of it counts.
    const stepPx = state.stretch.length === 0 ? context.slop : context.slop * STRETCH;
    if (!far(at, state.stretch.at(-1) ?? state.start, stepPx)) return { state };
    return { state: { ...state, stretch: [...state.stretch, at] } };
  }
  if (event.type === "double") return finishOutline([...state.points, state.start], context);
  if (event.type !== "up") return { state };
  if (state.stretch.length > 0) {
    // A freehand stretch ends where the hand let go; near the first point it closes the outline.
    const stretch = simplifyStretch([state.start, ...state.stretch], context.slop * STRETCH_TOLERANCE);
    const points = [...state.points, ...stretch];
    const end = stretch.at(-1) ?? state.start;
    if (points.length >= 4 && isClosing(end)) return finishOutline(points.slice(0, -1), context);
    return { state: { mode: "plotting", points, cursor: end } };
  }
  if (state.points.length >= 3 && isClosing(state.start)) return finishOutline(state.points, context);
  const points = [...state.points, state.start];
  const fourth = withoutRepeats(points, context.slop * REPEAT).length === 4;
  if (fourth && context.currentClass.geometry === "box") return finishExtremes(points, context);
  return { state: { mode: "plotting", points, cursor: state.start } };
}

function finishOutline(points: readonly Point[], context: ToolContext): ToolStep {
  // For a box only the span of the points counts: two are enough, and the way between them may cross itself.
  if (context.currentClass.geometry === "box") return finishSpan(points, context);
  const ring: Ring = withoutRepeats(points, context.slop * REPEAT);
  const problem = problemOfRings([ring]);
  if (problem) return { state: stillPlotting(points), problem };
  return add({ kind: "polygon", rings: [ring] }, context);
}

function finishSpan(points: readonly Point[], context: ToolContext): ToolStep {
  const [x, y, width, height] = bounds({ kind: "polygon", rings: [points] });
  return finishBox([x, y], [x + width, y + height], context, stillPlotting(points));
}

function finishExtremes(points: readonly Point[], context: ToolContext): ToolStep {
  const extremes = withoutRepeats(points, context.slop * REPEAT);
  const found = fromExtremes(extremes, context.size);
  if (!found)
    return { state: stillPlotting(points), problem: extremes.length === 4 ? "too-small" : "too-few" };
  if (context.currentClass.geometry === "box") return add({ kind: "box", box: found.box }, context);
  const problem = problemOfRings([found.ring]);
  if (problem) return { state: stillPlotting(points), problem };
  return { ...add({ kind: "polygon", rings: [found.ring] }, context), extremes };
}

function stillPlotting(points: readonly Point[]): ToolState {
  return { mode: "plotting", points, cursor: points.at(-1) ?? [0, 0] };
}

function finishBox(start: Point, end: Point, context: ToolContext, otherwise = IDLE): ToolStep {
  const box = boxBetween(start, end, context.size);
  return box ? add({ kind: "box", box }, context) : { state: otherwise, problem: "too-small" };
}

/** Adds a drawn shape in the current class. A box in a class of outlines stays one until it is outlined. */
function add(shape: Shape, context: ToolContext): ToolStep {
  const instance: DeskInstance = {
    id: context.newId(),
    classId: context.currentClass.id,
    shape,
    origin: "drawn",
    proposalId: null,
    crowd: false,
    occluded: false,
    truncated: touchesEdge(bounds(shape), context.size),
    note: "",
  };
  return { state: IDLE, command: { type: "add", instance }, select: instance.id };
}

/** What changes with a new shape: a taken proposal that was touched counts as adjusted. */
export function changed(
  instance: DeskInstance,
  shape: Shape,
): Partial<Pick<DeskInstance, "shape" | "origin">> {
  return instance.origin === "taken" ? { shape, origin: "adjusted" } : { shape };
}

function touchesEdge([x, y, width, height]: Box, size: Size): boolean {
  return x <= 0 || y <= 0 || x + width >= size.width || y + height >= size.height;
}

export type Draft =
  | { kind: "box"; start: Point; end: Point; box: Box }
  | { kind: "path"; points: readonly Point[]; cursor: Point }
  | { kind: "shape"; shape: Shape; id: string };

/** What is being drawn, for the paint layer. */
export function draftOf(state: ToolState): Draft | undefined {
  switch (state.mode) {
    case "boxing": {
      const { start, cursor } = state;
      const [ax, ay] = start;
      const [bx, by] = cursor;
      const box: Box = [Math.min(ax, bx), Math.min(ay, by), Math.abs(ax - bx), Math.abs(ay - by)];
      return { kind: "box", start, end: cursor, box };
    }
    case "plotting":
      return { kind: "path", points: state.points, cursor: state.cursor };
    case "plotting-press": {
      const points = [...state.points, state.start, ...state.stretch];
      return { kind: "path", points, cursor: state.stretch.at(-1) ?? state.start };
    }
    case "shaping":
      return { kind: "shape", shape: state.shape, id: state.id };
    default:
      return undefined;
  }
}
