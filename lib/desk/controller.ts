import type { DeskClass, DeskDocument, DeskInstance, DeskProposal, DeskTask } from "@/lib/contracts/desk";
import type { Point, Shape } from "@/lib/geometry/types";
import { cutOut, joined, sharingBorder, splitBy } from "./combine";
import { EMPTY_DOCUMENT, type Command } from "./document";
import { amend, historyOf, perform, redo, undo, type History } from "./history";
import { hitTest, SLOP_PX, type Hit } from "./hit";
import { DEFAULT_KEYS, type KeyTable } from "./keys";
import { bounds, inside, mend, moveShape, problemOfRings, replaceVertex, ringsOf, uncross } from "./shapes";
import { changed, IDLE, step, type ToolContext, type ToolEvent, type ToolState } from "./tool";
import { deal, taken } from "./tray";
import { fitBox, panBy, toImage, toScreen, zoomAt, type ScreenPoint, type Viewport } from "./viewport";

export type PointerKind = keyof typeof SLOP_PX;

/** What the next gesture does to a shape instead of drawing a new one. */
export type IntentKind = "extend" | "hole" | "split" | "join" | "inside" | "outside";
export type Intent = { readonly kind: IntentKind; readonly id: string };

/** What panels and settled shapes show. A new object at each change, the same one in between. */
export type Scene = {
  readonly document: DeskDocument;
  readonly mode: ToolState["mode"];
  readonly selectedId: string | null;
  /** The point of the selected shape that the keyboard holds, counted over all its rings. */
  readonly vertex: number | null;
  readonly intent: Intent | null;
  /** Whether a change was refused that mending would let in. */
  readonly canMend: boolean;
  readonly currentClassId: string;
  readonly hiddenClassIds: ReadonlySet<string>;
  readonly isDimmed: boolean;
  readonly dealt: readonly DeskProposal[];
  readonly dealtIndex: number;
  readonly canUndo: boolean;
  readonly canRedo: boolean;
  /** Said to everybody: shown, and read out. */
  readonly message: string;
  /** Whether the message is about something that went wrong. */
  readonly isWarning: boolean;
};

/** What changes with every move of the hand: kept apart, so that panels rest while it draws. */
export type Sketch = { readonly viewport: Viewport; readonly tool: ToolState; readonly cursor: Point | null };

type Options = {
  task: DeskTask;
  newId: () => string;
  onChange: (document: DeskDocument) => void;
  nowMs?: () => number;
};

/** Who finds outlines; told what the hand said about an object. */
export type Outliner = {
  /** An outline was begun from its four extreme points. */
  fromExtremes: (id: string, extremes: readonly Point[]) => void;
  /** A proposal that is but a box was taken in a class of outlines. */
  fromTaken: (id: string) => void;
  /** A stroke was drawn over what belongs to an instance, or over what does not. */
  addStroke: (id: string, kind: "inside" | "outside", from: Point, to: Point) => void;
};

type Listener = () => void;

/** Presses of an arrow within this time are one gesture, and one undo step. */
const NUDGE_JOIN_MS = 700;

/** Joins document, history, tool, tray and viewport. Knows neither React nor the canvas. */
export class DeskController {
  private history: History;
  private tool: ToolState = IDLE;
  private selectedId: string | null = null;
  private vertex: number | null = null;
  private intent: Intent | null = null;
  private refused: { id: string; shape: Shape } | null = null;
  private currentClassId: string;
  private hiddenClassIds: ReadonlySet<string> = new Set();
  private isDimmed = false;
  private viewport: Viewport = { scale: 1, x: 0, y: 0 };
  private stage = { width: 1, height: 1 };
  private hasFitted = false;
  private dealtIndex = 0;
  private cursor: Point | null = null;
  private message = "";
  private isWarning = false;
  private lastNudge = { id: "", atMs: -Infinity };
  private outliner: Outliner | null = null;
  private keys: KeyTable = DEFAULT_KEYS;
  private sceneListeners = new Set<Listener>();
  private sketchListeners = new Set<Listener>();
  private scene: Scene;
  private sketch: Sketch;
  private readonly classes: readonly DeskClass[];

  constructor(private readonly options: Options) {
    this.history = historyOf(options.task.draft ?? EMPTY_DOCUMENT);
    this.classes = options.task.classes;
    this.currentClassId = this.classes[0]?.id ?? "";
    this.scene = this.makeScene(undefined);
    this.sketch = { viewport: this.viewport, tool: this.tool, cursor: this.cursor };
  }

  subscribe = (listener: Listener): (() => void) => listen(this.sceneListeners, listener);
  getScene = (): Scene => this.scene;
  subscribeSketch = (listener: Listener): (() => void) => listen(this.sketchListeners, listener);
  getSketch = (): Sketch => this.sketch;

  setOutliner(outliner: Outliner | null): void {
    this.outliner = outliner;
  }

  /** The keys as this person has them, for what is said about them. */
  setKeys(keys: KeyTable): void {
    this.keys = keys;
  }

  get document(): DeskDocument {
    return this.history.document;
  }

  get isDrawing(): boolean {
    return this.tool.mode !== "idle";
  }

  // ---- the view

  resize(width: number, height: number): void {
    this.stage = { width, height };
    if (!this.hasFitted && width > 50 && height > 50) {
      this.hasFitted = true;
      this.viewport = fitBox([0, 0, this.options.task.width, this.options.task.height], width, height);
    }
    this.changed();
  }

  fit(): void {
    const { width, height } = this.options.task;
    this.viewport = fitBox([0, 0, width, height], this.stage.width, this.stage.height);
    this.changed();
  }

  fitSelection(): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.fit();
    const { width, height } = this.stage;
    this.viewport = fitBox(bounds(selected.shape), width, height, Math.min(width, height) / 4);
    this.changed();
  }

  zoom(at: ScreenPoint, factor: number): void {
    this.viewport = zoomAt(this.viewport, at, factor);
    this.changed();
  }

  zoomCentre(factor: number): void {
    this.zoom([this.stage.width / 2, this.stage.height / 2], factor);
  }

  /** Zooms by a key: to the pointer or crosshair where it is on the stage, else to the middle. */
  zoomByKey(factor: number): void {
    const [x, y] = this.cursor ? toScreen(this.viewport, this.cursor) : [-1, -1];
    const isSeen = x >= 0 && y >= 0 && x <= this.stage.width && y <= this.stage.height;
    if (isSeen) this.zoom([x, y], factor);
    else this.zoomCentre(factor);
  }

  pan(dx: number, dy: number): void {
    this.viewport = panBy(this.viewport, dx, dy);
    this.changed();
  }

  /** Brings a point of the image to the middle of the stage. */
  centreOn([x, y]: Point): void {
    const { scale } = this.viewport;
    this.viewport = { scale, x: this.stage.width / 2 - x * scale, y: this.stage.height / 2 - y * scale };
    this.changed();
  }

  /** The part of the image that the stage shows, px; it may reach beyond the image. */
  get shownBox(): readonly [number, number, number, number] {
    const [left, top] = toImage(this.viewport, [0, 0]);
    return [left, top, this.stage.width / this.viewport.scale, this.stage.height / this.viewport.scale];
  }

  // ---- the pointer

  private slop(kind: PointerKind): number {
    return SLOP_PX[kind] / this.viewport.scale;
  }

  hit(at: ScreenPoint, kind: PointerKind): Hit {
    const { selectedId, hiddenClassIds } = this;
    return hitTest(this.document.instances, toImage(this.viewport, at), {
      selectedId,
      hiddenClassIds,
      slop: this.slop(kind),
    });
  }

  /** `onGround` takes what lies there for open ground, so that one can draw on top of a shape. */
  pointerDown(at: ScreenPoint, kind: PointerKind, onGround = false): void {
    this.cursor = inside(toImage(this.viewport, at), this.options.task);
    const hit = this.hit(at, kind);
    if (this.intent?.kind === "join") return this.join(hit);
    const isGround = onGround || this.intent !== null;
    this.dispatch(
      { type: "down", at: toImage(this.viewport, at), hit: isGround ? { part: "ground" } : hit },
      kind,
    );
  }

  pointerMove(at: ScreenPoint, kind: PointerKind): void {
    this.cursor = toImage(this.viewport, at);
    if (this.tool.mode === "idle") return this.changed();
    this.dispatch({ type: "move", at: toImage(this.viewport, at) }, kind);
  }

  pointerUp(at: ScreenPoint, kind: PointerKind): void {
    this.dispatch({ type: "up", at: toImage(this.viewport, at) }, kind);
  }

  doubleClick(at: ScreenPoint, kind: PointerKind): void {
    if (this.tool.mode !== "plotting" && this.tool.mode !== "plotting-press") return;
    this.dispatch({ type: "double", at: toImage(this.viewport, at) }, kind);
  }

  pointerLeave(): void {
    this.cursor = null;
    this.changed();
  }

  /** The hand turned to something else; points that were set stay. */
  interrupt(): void {
    this.dispatch({ type: "interrupt" });
  }

  /** Sends an event to the tool and carries out what it answers. */
  dispatch(event: ToolEvent, kind: PointerKind = "mouse"): void {
    if (event.type === "up" && this.isLine(this.tool)) return this.endLine(this.tool, event.at);
    const outcome = step(this.tool, event, this.toolContext(kind));
    this.tool = outcome.state;
    if (outcome.refused) this.refused = outcome.refused;
    if (outcome.problem) this.warn(this.problemText(outcome.problem));
    if (outcome.command?.type === "add" && this.intent) {
      this.combine(this.intent, outcome.command.instance.shape);
    } else {
      if (outcome.select !== undefined) this.setSelected(outcome.select);
      if (outcome.command) this.perform(outcome.command, this.textOf(outcome.command));
      if (outcome.command?.type === "add" && outcome.extremes) {
        this.outliner?.fromExtremes(outcome.command.instance.id, outcome.extremes);
      }
    }
    this.changed();
  }

  private toolContext(kind: PointerKind): ToolContext {
    const target = this.find(this.intent?.id ?? null);
    return {
      size: this.options.task,
      slop: this.slop(kind),
      selectedId: this.selectedId,
      find: (id) => this.find(id),
      newId: this.options.newId,
      currentClass: this.classes.find((entry) => entry.id === target?.classId) ?? this.currentClass,
    };
  }

  // ---- what the next gesture does to the selected shape

  /** Arms an intent for the selected shape; again, and it is dropped. */
  intend(kind: IntentKind): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.warn("Select a shape first.");
    if (this.classOf(selected)?.geometry === "box" && kind !== "join") {
      return this.warn(`${this.nameOf(selected)} is drawn as boxes: there is no outline to change.`);
    }
    this.tool = IDLE;
    this.intent = this.intent?.kind === kind ? null : { kind, id: selected.id };
    this.say(this.intent ? INTENT[kind] : "Dropped.");
  }

  private isLine(tool: ToolState): tool is Extract<ToolState, { mode: "boxing" }> {
    const kind = this.intent?.kind;
    return tool.mode === "boxing" && (kind === "split" || kind === "inside" || kind === "outside");
  }

  private endLine({ start }: { start: Point }, end: Point): void {
    const target = this.find(this.intent?.id ?? null);
    const kind = this.intent?.kind;
    const to = inside(end, this.options.task);
    this.tool = IDLE;
    if (target && (kind === "inside" || kind === "outside")) {
      this.outliner?.addStroke(target.id, kind, start, to);
      this.intent = null;
    } else if (target) {
      this.split(target, start, to);
    }
    this.changed();
  }

  private split(target: DeskInstance, from: Point, to: Point): void {
    const parts = splitBy(target.shape, from, to, this.options.task);
    if (!parts) return this.warn("The line does not part it. Draw it right across.");
    const { proposalId: _, ...rest } = target;
    const second: DeskInstance = {
      ...rest,
      id: this.options.newId(),
      shape: parts[1],
      origin: "drawn",
      proposalId: null,
      note: "",
    };
    const commands: Command[] = [
      { type: "change", id: target.id, to: changed(target, parts[0]) },
      { type: "add", instance: second, index: this.document.instances.indexOf(target) + 1 },
    ];
    this.intent = null;
    this.perform({ type: "all", commands }, "Parted in two.");
  }

  private join(hit: Hit): void {
    const target = this.find(this.intent?.id ?? null);
    const other = hit.part === "ground" ? undefined : this.find(hit.id);
    if (!target || !other || other.id === target.id) return this.warn("Click another shape to join it with.");
    this.intent = null;
    this.joinWith(target, other);
    this.changed();
  }

  private joinWith(target: DeskInstance, other: DeskInstance): void {
    const both = joined(target.shape, other.shape, this.options.task);
    if (!both) return this.warn("These two could not be joined.");
    const isBox = this.classOf(target)?.geometry === "box";
    const shape: Shape = isBox ? { kind: "box", box: bounds(both) } : both;
    const commands: Command[] = [
      { type: "change", id: target.id, to: changed(target, shape) },
      { type: "remove", id: other.id },
    ];
    this.perform({ type: "all", commands }, "Joined.");
  }

  private combine({ kind, id }: Intent, drawn: Shape): void {
    const target = this.find(id);
    this.intent = null;
    if (!target) return;
    const { task } = this.options;
    const shape = kind === "hole" ? cutOut(target.shape, drawn, task) : joined(target.shape, drawn, task);
    if (!shape) return this.warn("Nothing of it would be left.");
    this.perform(
      { type: "change", id, to: changed(target, shape) },
      kind === "hole" ? "Cut out." : "Added to it.",
    );
  }

  /** Lets the selected shape's border run along its neighbours' where they are near. */
  shareBorder(kind: PointerKind = "mouse"): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.warn("Select a shape first.");
    if (selected.shape.kind === "box") return this.warn("A box has no border to share.");
    const reach = this.slop(kind) * 1.5;
    const [x, y, width, height] = bounds(selected.shape);
    const near = this.document.instances.filter((other) => {
      const [ox, oy, ow, oh] = bounds(other.shape);
      const apart =
        ox > x + width + reach || oy > y + height + reach || ox + ow < x - reach || oy + oh < y - reach;
      return other.id !== selected.id && other.shape.kind === "polygon" && !apart;
    });
    const shape = sharingBorder(
      selected.shape,
      near.map((other) => other.shape),
      reach,
      this.options.task,
    );
    if (!shape) return this.warn("No other outline is near enough. Zoom out for a longer reach.");
    this.perform({ type: "change", id: selected.id, to: changed(selected, shape) }, "The border is shared.");
    this.changed();
  }

  // ---- keys and buttons

  finish(): void {
    this.dispatch({ type: "finish" });
  }

  extremes(): void {
    if (this.tool.mode !== "plotting")
      return this.warn("Click the top, left, bottom and right of an object first.");
    this.dispatch({ type: "extremes" });
  }

  /** Drops what is being drawn; else what was intended; else the held point; else the selection. */
  cancel(): void {
    if (this.tool.mode !== "idle") return this.dispatch({ type: "cancel" });
    if (this.intent) {
      this.intent = null;
      return this.say("Dropped.");
    }
    if (this.vertex !== null) {
      this.vertex = null;
      return this.changed();
    }
    this.select(null);
  }

  /** Ends an outline that crosses itself without the crossings, or lets a refused change in without them. */
  repair(): void {
    if (this.tool.mode === "plotting") {
      this.tool = { ...this.tool, points: uncross(this.tool.points) };
      return this.finish();
    }
    const refused = this.refused;
    const instance = this.find(refused?.id ?? null);
    if (!refused || !instance) return this.warn("Nothing needs mending.");
    const rings = mend(ringsOf(refused.shape));
    if (!rings) return this.warn("Nothing of it would be left.");
    this.perform(
      { type: "change", id: instance.id, to: changed(instance, { kind: "polygon", rings }) },
      "Mended.",
    );
    this.changed();
  }

  stepBack(): boolean {
    if (this.tool.mode !== "plotting") return false;
    this.dispatch({ type: "back" });
    return true;
  }

  undo(): void {
    if (this.stepBack()) return;
    if (this.history.undoable.length === 0) return this.say("Nothing to undo.");
    this.history = undo(this.history);
    this.afterChange("Undone.");
    this.changed();
  }

  redo(): void {
    if (this.history.redoable.length === 0) return this.say("Nothing to do again.");
    this.history = redo(this.history);
    this.afterChange("Done again.");
    this.changed();
  }

  select(id: string | null): void {
    this.setSelected(id);
    const instance = this.find(id);
    if (instance) this.say(`${this.nameOf(instance)} selected.`);
    this.changed();
  }

  /** The next or previous shape, around the end. */
  selectNext(by: 1 | -1): void {
    const list = this.document.instances.filter((instance) => !this.hiddenClassIds.has(instance.classId));
    if (list.length === 0) return this.say("Nothing is drawn yet.");
    const at = list.findIndex((instance) => instance.id === this.selectedId);
    const next = at < 0 ? (by === 1 ? 0 : list.length - 1) : (at + by + list.length) % list.length;
    const instance = list[next];
    if (!instance) return;
    this.setSelected(instance.id);
    this.fitIfHidden(instance);
    this.say(`${this.nameOf(instance)}, ${next + 1} of ${list.length}.`);
  }

  /** Holds the next point of the selected shape, around the end; a box's corners count as points. */
  holdVertex(by: 1 | -1): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.warn("Select a shape first.");
    const points = ringsOf(selected.shape).flat();
    const from = this.vertex ?? (by === 1 ? -1 : 0);
    this.vertex = (from + by + points.length) % points.length;
    this.cursor = points[this.vertex] ?? null;
    this.say(`Point ${this.vertex + 1} of ${points.length}. Move it by the arrows.`);
  }

  /** The point that the keyboard holds, else the one under the cursor, else the selected shape. */
  deleteAt(at: ScreenPoint | null): void {
    if (this.stepBack()) return;
    const selected = this.find(this.selectedId);
    const held = selected && this.vertex !== null ? locate(selected.shape, this.vertex) : undefined;
    const hit: Hit | null =
      selected && held ? { part: "vertex", id: selected.id, ...held } : at && this.hit(at, "mouse");
    if (hit?.part === "vertex" && this.find(hit.id)?.shape.kind === "polygon") {
      this.vertex = null;
      return this.dispatch({ type: "delete-vertex", hit });
    }
    if (!selected) return;
    this.remove(selected.id);
  }

  /** Moves by image px: the held point, else the selected shape, else the keyboard's crosshair. */
  nudge(dx: number, dy: number): void {
    const selected = this.find(this.selectedId);
    if (!selected || this.tool.mode !== "idle" || this.intent) return this.moveCrosshair(dx, dy);
    const shape =
      this.vertex === null
        ? moveShape(selected.shape, dx, dy, this.options.task)
        : this.withVertexMoved(selected.shape, this.vertex, dx, dy);
    if (!shape) return;
    const command: Command = { type: "change", id: selected.id, to: changed(selected, shape) };
    const id = `${selected.id}/${this.vertex ?? ""}`;
    const nowMs = this.options.nowMs?.() ?? Date.now();
    const isSameGesture = this.lastNudge.id === id && nowMs - this.lastNudge.atMs < NUDGE_JOIN_MS;
    const next = isSameGesture ? amend(this.history, command) : perform(this.history, command);
    if (next === this.history) return;
    this.history = next;
    this.afterChange("");
    this.lastNudge = { id, atMs: nowMs };
    this.changed();
  }

  private withVertexMoved(shape: Shape, vertex: number, dx: number, dy: number): Shape | undefined {
    const { task } = this.options;
    const place = locate(shape, vertex);
    const from = ringsOf(shape).flat()[vertex];
    if (!place || !from) return undefined;
    const to = inside([from[0] + dx, from[1] + dy], task);
    this.cursor = to;
    if (shape.kind === "box") {
      const [x, y, width, height] = shape.box;
      const isRight = vertex === 1 || vertex === 2;
      const isBottom = vertex >= 2;
      const [left, right] = isRight ? [x, to[0]] : [to[0], x + width];
      const [top, bottom] = isBottom ? [y, to[1]] : [to[1], y + height];
      if (right - left < 2 || bottom - top < 2) return undefined;
      return { kind: "box", box: [left, top, right - left, bottom - top] };
    }
    const rings = replaceVertex(shape.rings, place.ring, place.vertex, to);
    const problem = problemOfRings(rings);
    if (!problem) return { kind: "polygon", rings };
    this.warn(this.problemText(problem));
    return undefined;
  }

  private moveCrosshair(dx: number, dy: number): void {
    const from = this.cursor ?? this.middle;
    this.cursor = inside([from[0] + dx, from[1] + dy], this.options.task);
    if (this.tool.mode === "plotting" || this.tool.mode === "boxing")
      this.tool = { ...this.tool, cursor: this.cursor };
    const [left, top, width, height] = this.shownBox;
    const [x, y] = this.cursor;
    if (x < left || y < top || x > left + width || y > top + height) this.centreOn(this.cursor);
    this.changed();
  }

  private get middle(): Point {
    return inside(toImage(this.viewport, [this.stage.width / 2, this.stage.height / 2]), this.options.task);
  }

  /** Sets a point at the keyboard's crosshair, as a click would. */
  plotAtCursor(): void {
    const at = inside(this.cursor ?? this.middle, this.options.task);
    this.cursor = at;
    this.dispatch({ type: "down", at, hit: { part: "ground" } });
    this.dispatch({ type: "up", at });
    if (this.tool.mode === "plotting")
      this.say(`Point ${this.tool.points.length} at ${Math.round(at[0])}, ${Math.round(at[1])}.`);
  }

  /** Begins a box at the keyboard's crosshair, or ends the one that was begun. */
  boxAtCursor(): void {
    const at = inside(this.cursor ?? this.middle, this.options.task);
    this.cursor = at;
    if (this.tool.mode === "boxing") return this.dispatch({ type: "up", at });
    if (!this.intent) this.setSelected(null);
    this.tool = { mode: "boxing", start: at, cursor: at };
    this.say(
      `Box begun at ${Math.round(at[0])}, ${Math.round(at[1])}. Move by the arrows and press the key again.`,
    );
  }

  /** The class of what is selected, or of what is drawn next. */
  setClassByNumber(number: number): void {
    const kind = this.classes.find((entry) => entry.number === number);
    if (kind) this.setClass(kind.id);
  }

  setClass(classId: string): void {
    const kind = this.classes.find((entry) => entry.id === classId);
    if (!kind) return;
    this.currentClassId = classId;
    const selected = this.find(this.selectedId);
    if (selected && this.tool.mode === "idle" && selected.classId !== classId) {
      const isFlattened = kind.geometry === "box" && selected.shape.kind === "polygon";
      const to = isFlattened ? changed(selected, { kind: "box", box: bounds(selected.shape) }) : {};
      this.perform({ type: "change", id: selected.id, to: { classId, ...to } }, `Now ${kind.name}.`);
    } else {
      this.say(`Drawing ${kind.name}.`);
    }
    this.changed();
  }

  toggleClass(classId: string): void {
    const next = new Set(this.hiddenClassIds);
    if (!next.delete(classId)) next.add(classId);
    this.hiddenClassIds = next;
    const selected = this.find(this.selectedId);
    if (selected && next.has(selected.classId)) this.setSelected(null);
    const name = this.classes.find((entry) => entry.id === classId)?.name ?? "";
    this.say(next.has(classId) ? `${name} hidden.` : `${name} shown.`);
  }

  toggleDim(): void {
    this.isDimmed = !this.isDimmed;
    this.say(this.isDimmed ? "What is drawn is dimmed." : "What is drawn is shown in full.");
  }

  setFlags(flags: Partial<Pick<DeskInstance, "crowd" | "occluded" | "truncated">>): void {
    if (this.selectedId) this.perform({ type: "change", id: this.selectedId, to: flags }, "");
    this.changed();
  }

  /** The note of an instance, which need not be selected any more when its field is left. */
  setNote(id: string, note: string): void {
    this.perform({ type: "change", id, to: { note } }, "Noted.");
    this.changed();
  }

  remove(id: string): void {
    const instance = this.find(id);
    if (instance) this.perform({ type: "remove", id }, `${this.nameOf(instance)} removed.`);
    this.changed();
  }

  toggleFlag(flag: "crowd" | "occluded" | "truncated"): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.warn("Select a shape first.");
    this.setFlags({ [flag]: !selected[flag] });
    this.say(`${FLAG[flag]}: ${selected[flag] ? "no" : "yes"}.`);
  }

  duplicate(): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.warn("Select a shape first.");
    const id = this.options.newId();
    const shape = moveShape(selected.shape, 10, 10, this.options.task);
    const copy: DeskInstance = { ...selected, id, origin: "drawn", proposalId: null, shape };
    this.perform({ type: "add", instance: copy }, "Duplicated.");
    this.setSelected(id);
    this.changed();
  }

  /** Puts an outline in place of the selected shape's geometry. */
  setOutline(id: string, shape: Shape): void {
    const instance = this.find(id);
    if (instance) {
      this.perform(
        { type: "change", id, to: changed(instance, shape) },
        "Outlined. Adjust it where it is off.",
      );
    }
    this.changed();
  }

  /**
   * Puts the outline that was found for a box in its place; its rectangle, where none was found, so that the
   * drawing can be handed in. One undoable command. Whose box it was stays as it was: nobody adjusted it.
   * Does nothing where the shape is no longer `asked`, or its class wants boxes by now.
   */
  outlineBox(id: string, asked: Shape, found: Shape | null): void {
    const instance = this.find(id);
    if (instance?.shape !== asked || this.classOf(instance)?.geometry !== "polygon") return;
    const shape: Shape = found ?? { kind: "polygon", rings: ringsOf(asked) };
    this.perform({ type: "change", id, to: { shape } }, found ? "Outlined. Adjust it where it is off." : "");
    if (!found) return this.warn("No outline was found: the rectangle stands in for it. Adjust it.");
    this.changed();
  }

  // ---- the tray

  get dealt(): DeskProposal | undefined {
    return this.scene.dealt[this.dealtIndex];
  }

  showDealt(index: number): void {
    const count = this.scene.dealt.length;
    if (count === 0) return this.say("The tray is empty.");
    this.dealtIndex = (index + count) % count;
    this.say(`Proposal ${this.dealtIndex + 1} of ${count}.`);
  }

  take(adjust: boolean): void {
    const proposal = this.dealt;
    if (!proposal) return this.say("The tray is empty.");
    const kind = this.classes.find((entry) => entry.id === proposal.classId) ?? this.currentClass;
    const instance = taken(proposal, kind, this.options.newId());
    this.perform({ type: "add", instance }, `${kind.name} taken.`);
    this.setSelected(adjust ? instance.id : null);
    if (adjust) this.fitIfHidden(instance);
    this.changed();
    if (kind.geometry === "polygon" && instance.shape.kind === "box") this.outliner?.fromTaken(instance.id);
  }

  sendAway(): void {
    const proposal = this.dealt;
    if (!proposal) return this.say("The tray is empty.");
    this.perform({ type: "dismiss", proposalId: proposal.id }, "Sent away.");
    this.changed();
  }

  // ---- the rest

  get currentClass(): DeskClass {
    const found = this.classes.find((entry) => entry.id === this.currentClassId) ?? this.classes[0];
    if (!found) throw new RangeError("a key has at least one class");
    return found;
  }

  find(id: string | null): DeskInstance | undefined {
    return id === null ? undefined : this.document.instances.find((instance) => instance.id === id);
  }

  private classOf(instance: DeskInstance): DeskClass | undefined {
    return this.classes.find((entry) => entry.id === instance.classId);
  }

  nameOf(instance: DeskInstance): string {
    return this.classOf(instance)?.name ?? "shape";
  }

  say(message: string): void {
    this.message = message;
    this.isWarning = false;
    this.changed();
  }

  warn(message: string): void {
    this.message = message;
    this.isWarning = true;
    this.changed();
  }

  private setSelected(id: string | null): void {
    if (id === this.selectedId) return;
    this.selectedId = id;
    this.vertex = null;
    if (this.intent && this.intent.id !== id) this.intent = null;
  }

  private problemText(problem: keyof typeof PROBLEM): string {
    if (problem !== "crosses") return PROBLEM[problem];
    const mend = `${PROBLEM.crosses} Press ${this.keys.mend.toUpperCase()} to mend it`;
    return this.tool.mode === "idle" ? `${mend}.` : `${mend}, or Backspace to take points back.`;
  }

  private textOf(command: Command): string {
    if (command.type === "remove") return "Removed.";
    if (command.type !== "add") return "";
    const kind = this.nameOf(command.instance);
    const name = kind === "shape" ? this.classOf(command.instance)?.name : kind;
    return command.instance.shape.kind === "box" ? `${name}: box drawn.` : `${name}: outline drawn.`;
  }

  private fitIfHidden(instance: DeskInstance): void {
    const [x, y, width, height] = bounds(instance.shape);
    const [left, top, shownWidth, shownHeight] = this.shownBox;
    const isSeen = x >= left && y >= top && x + width <= left + shownWidth && y + height <= top + shownHeight;
    if (!isSeen || Math.max(width, height) * this.viewport.scale < 40) this.fitSelection();
  }

  private perform(command: Command, message: string): void {
    const next = perform(this.history, command);
    if (next === this.history) return;
    this.history = next;
    this.afterChange(message);
  }

  private afterChange(message: string): void {
    if (!this.find(this.selectedId)) this.setSelected(null);
    if (!this.find(this.intent?.id ?? null)) this.intent = null;
    const selected = this.find(this.selectedId);
    if (selected && this.vertex !== null && this.vertex >= ringsOf(selected.shape).flat().length)
      this.vertex = null;
    this.lastNudge = { id: "", atMs: -Infinity };
    this.refused = null;
    if (message) {
      this.message = message;
      this.isWarning = false;
    }
    this.options.onChange(this.document);
  }

  private makeScene(before: Scene | undefined): Scene {
    const { document } = this;
    const { task } = this.options;
    const dealt =
      before?.document === document
        ? before.dealt
        : deal(task.proposals, document, this.classes, task.dealing);
    this.dealtIndex = Math.min(this.dealtIndex, Math.max(0, dealt.length - 1));
    return {
      document,
      mode: this.tool.mode,
      selectedId: this.selectedId,
      vertex: this.vertex,
      intent: this.intent,
      canMend: this.refused !== null,
      currentClassId: this.currentClassId,
      hiddenClassIds: this.hiddenClassIds,
      isDimmed: this.isDimmed,
      dealt,
      dealtIndex: this.dealtIndex,
      canUndo: this.history.undoable.length > 0,
      canRedo: this.history.redoable.length > 0,
      message: this.message,
      isWarning: this.isWarning,
    };
  }

  private changed(): void {
    const { viewport, tool, cursor } = this;
    const scene = this.makeScene(this.scene);
    const hasNewScene = !isShallowEqual(this.scene, scene);
    const sketch: Sketch = { viewport, tool, cursor };
    const hasNewSketch = !isShallowEqual(this.sketch, sketch);
    if (hasNewScene) this.scene = scene;
    if (hasNewSketch) this.sketch = sketch;
    if (hasNewScene) for (const listener of this.sceneListeners) listener();
    if (hasNewSketch) for (const listener of this.sketchListeners) listener();
  }
}

function listen(listeners: Set<Listener>, listener: Listener): () => void {
  listeners.add(listener);
  return () => listeners.delete(listener);
}

function isShallowEqual<T extends object>(a: T, b: T): boolean {
  return (Object.keys(a) as (keyof T)[]).every((name) => a[name] === b[name]); // keys of T, which both have
}

/** Ring and vertex of a point counted over all rings. */
function locate(shape: Shape, count: number): { ring: number; vertex: number } | undefined {
  let left = count;
  const rings = ringsOf(shape);
  for (let ring = 0; ring < rings.length; ring++) {
    const size = rings[ring]?.length ?? 0;
    if (left < size) return { ring, vertex: left };
    left -= size;
  }
  return undefined;
}

const PROBLEM = {
  "too-few": "An outline needs three points or more; four for the extremes.",
  "too-small": "Too small to be meant. Zoom in if it is real.",
  crosses: "The outline crosses itself.",
} as const;

const INTENT: Record<IntentKind, string> = {
  extend: "Draw what is to be added to it.",
  hole: "Draw what is to be cut out of it.",
  split: "Drag a line right across it.",
  join: "Click the shape to join it with.",
  inside: "Drag over a part that belongs to it.",
  outside: "Drag over a part that does not belong to it.",
};

const FLAG = { crowd: "A crowd", occluded: "Partly hidden", truncated: "Cut by the edge" } as const;
