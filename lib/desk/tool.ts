import type { DeskClass, DeskInstance } from "@/lib/contracts/desk";
import type { Box, Point, Ring, Rings, Shape } from "@/lib/geometry/types";
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
  problemOf,
  removeVertex,
  replaceVertex,
  withoutRepeats,
  type RingProblem,
  type Size,
} from "./shapes";

/**
 * The one modeless tool: what the pointer does decides what is drawn. Press and drag on open ground makes a
 * box; clicks set the points of an outline; a drag between clicks adds a freehand stretch. On the selected
 * shape a vertex, an edge or the body can be dragged. Pure and total: events in, state and commands out.
 */
export type ToolState =
  | { mode: "idle" }
  | { mode: "pressing"; start: Point; hit: Hit }
  | { mode: "boxing"; start: Point; cursor: Point }
  | { mode: "plotting"; points: readonly Point[]; cursor: Point }
  | { mode: "plotting-press"; points: readonly Point[]; start: Point; stretch: readonly Point[] }
  | { mode: "shaping"; id: string; grip: Grip; original: DeskInstance; shape: Shape };

type Grip = { kind: "vertex"; ring: number; vertex: number } | { kind: "body"; start: Point };

export type ToolEvent =
  | { type: "down"; at: Point; hit: Hit }
  | { type: "move"; at: Point }
  | { type: "up"; at: Point }
  | { type: "double"; at: Point }
  | { type: "finish" }
  | { type: "extremes" }
  | { type: "back" }
  | { type: "cancel" }
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
};

export const IDLE: ToolState = { mode: "idle" };

const far = (a: Point, b: Point, than: number) => Math.hypot(a[0] - b[0], a[1] - b[1]) > than;

export function step(state: ToolState, event: ToolEvent, context: ToolContext): ToolStep {
  if (event.type === "cancel") return { state: IDLE };
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

function fromIdle(event: ToolEvent, context: ToolContext): ToolStep {
  if (event.type === "down") return { state: { mode: "pressing", start: inside(event.at, context.size), hit: event.hit } };
  if (event.type === "delete-vertex") return deleteVertex(event.hit, context);
  return { state: IDLE };
}

function deleteVertex(hit: Hit, { find }: ToolContext): ToolStep {
  if (hit.part !== "vertex") return { state: IDLE };
  const instance = find(hit.id);
  if (!instance || instance.shape.kind !== "polygon") return { state: IDLE };
  const rings = removeVertex(instance.shape.rings, hit.ring, hit.vertex);
  if (!rings) return { state: IDLE, command: { type: "remove", id: hit.id }, select: null };
  return { state: IDLE, command: { type: "change", id: hit.id, to: changed(instance, { kind: "polygon", rings }) } };
}

function fromPressing(state: Extract<ToolState, { mode: "pressing" }>, event: ToolEvent, context: ToolContext): ToolStep {
  const { hit, start } = state;
  if (event.type === "move") {
    if (!far(event.at, start, context.slop)) return { state };
    const grip = gripOf(hit, start, context);
    if (grip) {
      const shaping = { mode: "shaping", id: grip.original.id, grip: grip.grip, original: grip.original, shape: grip.shape } as const;
      return fromShaping(shaping, event, context);
    }
    return { state: { mode: "boxing", start, cursor: inside(event.at, context.size) } };
  }
  if (event.type !== "up") return { state };
  // A press that did not move: a click. On a shape it selects; on open ground it sets the first point.
  if (hit.part === "body" || hit.part === "vertex" || hit.part === "edge") return { state: IDLE, select: hit.id };
  return { state: { mode: "plotting", points: [start], cursor: start }, select: null };
}

/** What a drag from this hit takes hold of: a vertex, a new vertex on an edge, or the selected body. */
function gripOf(hit: Hit, start: Point, { selectedId, find }: ToolContext): { grip: Grip; original: DeskInstance; shape: Shape } | undefined {
  if (hit.part === "ground" || hit.id !== selectedId) return undefined;
  const original = find(hit.id);
  if (!original) return undefined;
  if (hit.part === "body") return { grip: { kind: "body", start }, original, shape: original.shape };
  const { shape } = original;
  if (shape.kind === "box") {
    return hit.part === "vertex" ? { grip: { kind: "vertex", ring: 0, vertex: hit.vertex }, original, shape } : { grip: { kind: "body", start }, original, shape };
  }
  if (hit.part === "vertex") return { grip: { kind: "vertex", ring: hit.ring, vertex: hit.vertex }, original, shape };
  const rings = insertVertex(shape.rings, hit.ring, hit.vertex, hit.at);
  return { grip: { kind: "vertex", ring: hit.ring, vertex: hit.vertex + 1 }, original, shape: { kind: "polygon", rings } };
}

function fromShaping(state: Extract<ToolState, { mode: "shaping" }>, event: ToolEvent, context: ToolContext): ToolStep {
  if (event.type === "move" || event.type === "up") {
    const shape = reshape(state, inside(event.at, context.size), context.size) ?? state.shape;
    if (event.type === "move") return { state: { ...state, shape } };
    const ring = shape.kind === "polygon" ? shape.rings.find((candidate) => problemOf(candidate)) : undefined;
    const problem = ring && problemOf(ring);
    if (problem) return { state: IDLE, problem };
    return { state: IDLE, command: { type: "change", id: state.id, to: changed(state.original, shape) } };
  }
  return { state };
}

function reshape({ grip, original, shape }: Extract<ToolState, { mode: "shaping" }>, at: Point, size: Size): Shape | undefined {
  if (grip.kind === "body") return moveShape(original.shape, at[0] - grip.start[0], at[1] - grip.start[1], size);
  if (shape.kind === "polygon") return { kind: "polygon", rings: replaceVertex(shape.rings, grip.ring, grip.vertex, at) };
  // A corner of a box: the opposite one stays.
  if (original.shape.kind !== "box") return undefined;
  const opposite = corners(original.shape.box)[(grip.vertex + 2) % 4];
  const box = opposite && boxBetween(at, opposite, size);
  return box && { kind: "box", box };
}

function fromPlotting(state: Extract<ToolState, { mode: "plotting" }>, event: ToolEvent, context: ToolContext): ToolStep {
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
      return finishExtremes(state, context);
    case "back":
      return state.points.length <= 1 ? { state: IDLE } : { state: { ...state, points: state.points.slice(0, -1) } };
    default:
      return { state };
  }
}

function fromPlottingPress(state: Extract<ToolState, { mode: "plotting-press" }>, event: ToolEvent, context: ToolContext): ToolStep {
  const [first] = state.points;
  if (event.type === "move") {
    const at = inside(event.at, context.size);
    const last = state.stretch.at(-1) ?? state.start;
    if (!far(at, last, context.slop)) return { state };
    return { state: { ...state, stretch: [...state.stretch, at] } };
  }
  if (event.type === "double") return finishOutline([...state.points, state.start], context);
  if (event.type !== "up") return { state };
  if (state.stretch.length > 0) {
    // A freehand stretch ends where the hand let go; near the first point it closes the outline.
    const points = [...state.points, state.start, ...state.stretch];
    const end = state.stretch.at(-1) ?? state.start;
    if (first && points.length >= 4 && !far(end, first, context.slop * 1.5)) return finishOutline(points.slice(0, -1), context);
    return { state: { mode: "plotting", points, cursor: end } };
  }
  if (first && state.points.length >= 3 && !far(state.start, first, context.slop * 1.5)) return finishOutline(state.points, context);
  return { state: { mode: "plotting", points: [...state.points, state.start], cursor: state.start } };
}

function finishOutline(points: readonly Point[], context: ToolContext): ToolStep {
  const ring: Ring = withoutRepeats(points, context.slop / 4);
  const problem = problemOf(ring);
  if (problem) return { state: { mode: "plotting", points, cursor: points.at(-1) ?? [0, 0] }, problem };
  return add({ kind: "polygon", rings: [ring] }, context);
}

function finishExtremes(state: Extract<ToolState, { mode: "plotting" }>, context: ToolContext): ToolStep {
  const found = fromExtremes(withoutRepeats(state.points, context.slop / 4), context.size);
  if (!found) return { state, problem: "too-few" };
  return add(context.currentClass.geometry === "box" ? { kind: "box", box: found.box } : { kind: "polygon", rings: [found.ring] }, context);
}

function finishBox(start: Point, end: Point, context: ToolContext): ToolStep {
  const box = boxBetween(start, end, context.size);
  return box ? add({ kind: "box", box }, context) : { state: IDLE, problem: "too-small" };
}

/** Adds a drawn shape in the current class; an outline in a class of boxes becomes its box. */
function add(shape: Shape, context: ToolContext): ToolStep {
  const fitting: Shape = context.currentClass.geometry === "box" ? { kind: "box", box: bounds(shape) } : shape;
  const instance: DeskInstance = {
    id: context.newId(),
    classId: context.currentClass.id,
    shape: fitting,
    origin: "drawn",
    proposalId: null,
    crowd: false,
    occluded: false,
    truncated: touchesEdge(bounds(fitting), context.size),
    note: "",
  };
  return { state: IDLE, command: { type: "add", instance }, select: instance.id };
}

/** What changes with a new shape: a taken proposal that was touched counts as adjusted. */
export function changed(instance: DeskInstance, shape: Shape): Pick<DeskInstance, "shape" | "origin"> {
  return { shape, origin: instance.origin === "taken" ? "adjusted" : instance.origin };
}

function touchesEdge([x, y, width, height]: Box, size: Size): boolean {
  return x <= 0 || y <= 0 || x + width >= size.width || y + height >= size.height;
}

/** The outline that is being drawn, for the paint layer. */
export function draftOf(state: ToolState): { kind: "box"; box: Box } | { kind: "path"; points: readonly Point[]; cursor: Point } | { kind: "shape"; shape: Shape; id: string } | undefined {
  if (state.mode === "boxing") {
    const [ax, ay] = state.start;
    const [bx, by] = state.cursor;
    return { kind: "box", box: [Math.min(ax, bx), Math.min(ay, by), Math.abs(ax - bx), Math.abs(ay - by)] };
  }
  if (state.mode === "plotting") return { kind: "path", points: state.points, cursor: state.cursor };
  if (state.mode === "plotting-press") return { kind: "path", points: [...state.points, state.start, ...state.stretch], cursor: state.stretch.at(-1) ?? state.start };
  if (state.mode === "shaping") return { kind: "shape", shape: state.shape, id: state.id };
  return undefined;
}

export type { Rings };
