import type { DeskClass, DeskDocument, DeskInstance, DeskProposal, DeskTask } from "@/lib/contracts/desk";
import type { Point, Shape } from "@/lib/geometry/types";
import { EMPTY_DOCUMENT, type Command } from "./document";
import { historyOf, perform, redo, undo, type History } from "./history";
import { hitTest, SLOP_PX, type Hit } from "./hit";
import { bounds, inside, moveShape, uncross } from "./shapes";
import { changed, IDLE, step, type ToolEvent, type ToolState } from "./tool";
import { deal, taken } from "./tray";
import { fitBox, panBy, toImage, zoomAt, type ScreenPoint, type Viewport } from "./viewport";

export type PointerKind = keyof typeof SLOP_PX;

/** What the paint layers and panels show. A new object at each change, the same one in between. */
export type Scene = {
  readonly document: DeskDocument;
  readonly viewport: Viewport;
  readonly tool: ToolState;
  readonly selectedId: string | null;
  readonly currentClassId: string;
  readonly hiddenClassIds: ReadonlySet<string>;
  readonly dealt: readonly DeskProposal[];
  readonly dealtIndex: number;
  readonly cursor: Point | null;
  readonly canUndo: boolean;
  readonly canRedo: boolean;
  /** Said to everybody: shown for a while, and read out. */
  readonly message: string;
  readonly revision: number;
};

type Options = { task: DeskTask; newId: () => string; onChange: (document: DeskDocument) => void };

/** Joins document, history, tool, tray and viewport. Knows neither React nor the canvas. */
export class DeskController {
  private history: History;
  private tool: ToolState = IDLE;
  private selectedId: string | null = null;
  private currentClassId: string;
  private hiddenClassIds: ReadonlySet<string> = new Set();
  private viewport: Viewport = { scale: 1, x: 0, y: 0 };
  private stage = { width: 1, height: 1 };
  private hasFitted = false;
  private dealtIndex = 0;
  private cursor: Point | null = null;
  private message = "";
  private revision = 0;
  private listeners = new Set<() => void>();
  private scene: Scene;
  private readonly classes: readonly DeskClass[];

  constructor(private readonly options: Options) {
    this.history = historyOf(options.task.draft ?? EMPTY_DOCUMENT);
    this.classes = options.task.classes;
    this.currentClassId = this.classes[0]?.id ?? "";
    this.scene = this.makeScene();
  }

  subscribe = (listener: () => void): (() => void) => {
    this.listeners.add(listener);
    return () => this.listeners.delete(listener);
  };

  getScene = (): Scene => this.scene;

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
    this.viewport = fitBox([0, 0, this.options.task.width, this.options.task.height], this.stage.width, this.stage.height);
    this.changed();
  }

  fitSelection(): void {
    const selected = this.find(this.selectedId);
    if (!selected) return this.fit();
    this.viewport = fitBox(bounds(selected.shape), this.stage.width, this.stage.height, Math.min(this.stage.width, this.stage.height) / 4);
    this.changed();
  }

  zoom(at: ScreenPoint, factor: number): void {
    this.viewport = zoomAt(this.viewport, at, factor);
    this.changed();
  }

  zoomCentre(factor: number): void {
    this.zoom([this.stage.width / 2, this.stage.height / 2], factor);
  }

  pan(dx: number, dy: number): void {
    this.viewport = panBy(this.viewport, dx, dy);
    this.changed();
  }

  // ---- the pointer

  private slop(kind: PointerKind): number {
    return SLOP_PX[kind] / this.viewport.scale;
  }

  hit(at: ScreenPoint, kind: PointerKind): Hit {
    const shown = this.document.instances.filter((instance) => !this.hiddenClassIds.has(instance.classId));
    return hitTest(shown, this.selectedId, toImage(this.viewport, at), this.slop(kind));
  }

  pointerDown(at: ScreenPoint, kind: PointerKind): void {
    this.dispatch({ type: "down", at: toImage(this.viewport, at), hit: this.hit(at, kind) }, kind);
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
    if (this.tool.mode === "plotting" || this.tool.mode === "plotting-press") this.dispatch({ type: "double", at: toImage(this.viewport, at) }, kind);
  }

  pointerLeave(): void {
    this.cursor = null;
    this.changed();
  }

  /** Sends an event to the tool and carries out what it answers. */
  dispatch(event: ToolEvent, kind: PointerKind = "mouse"): void {
    const { task } = this.options;
    const outcome = step(this.tool, event, {
      size: task,
      slop: this.slop(kind),
      selectedId: this.selectedId,
      find: (id) => this.find(id),
      newId: this.options.newId,
      currentClass: this.currentClass,
    });
    this.tool = outcome.state;
    if (outcome.select !== undefined) this.selectedId = outcome.select;
    if (outcome.problem) this.say(PROBLEM[outcome.problem]);
    if (outcome.command) this.perform(outcome.command, outcome.command.type === "add" ? this.addedText(outcome.command.instance) : "");
    this.changed();
  }

  // ---- keys and buttons

  finish(): void {
    this.dispatch({ type: "finish" });
  }

  extremes(): void {
    this.dispatch({ type: "extremes" });
  }

  cancel(): void {
    if (this.tool.mode !== "idle") this.dispatch({ type: "cancel" });
    else this.select(null);
  }

  /** Ends an outline that crosses itself by undoing the crossings. */
  repair(): void {
    if (this.tool.mode !== "plotting") return;
    this.tool = { ...this.tool, points: uncross(this.tool.points) };
    this.finish();
  }

  stepBack(): boolean {
    if (this.tool.mode !== "plotting") return false;
    this.dispatch({ type: "back" });
    return true;
  }

  undo(): void {
    if (this.stepBack()) return;
    this.history = undo(this.history);
    this.afterChange("Undone.");
  }

  redo(): void {
    this.history = redo(this.history);
    this.afterChange("Done again.");
  }

  select(id: string | null): void {
    this.selectedId = id;
    const instance = this.find(id);
    if (instance) this.say(this.nameOf(instance));
    this.changed();
  }

  /** The next or previous shape, around the end. */
  selectNext(by: 1 | -1): void {
    const list = this.document.instances;
    if (list.length === 0) return;
    const at = list.findIndex((instance) => instance.id === this.selectedId);
    this.select(list[(at + by + list.length) % list.length]?.id ?? null);
  }

  /** The vertex under the cursor of the selected outline, else the selected shape. */
  deleteAt(at: ScreenPoint | null): void {
    if (this.stepBack()) return;
    const hit = at ? this.hit(at, "mouse") : null;
    const isVertex = hit?.part === "vertex" && this.find(hit.id)?.shape.kind === "polygon";
    if (hit && isVertex) return this.dispatch({ type: "delete-vertex", hit });
    const selected = this.find(this.selectedId);
    if (!selected) return;
    this.selectedId = null;
    this.perform({ type: "remove", id: selected.id }, `${this.nameOf(selected)} removed.`);
    this.changed();
  }

  /** Moves the selected shape by image px; without one, the keyboard's own cursor. */
  nudge(dx: number, dy: number): void {
    const selected = this.find(this.selectedId);
    if (selected && this.tool.mode === "idle") {
      const shape = moveShape(selected.shape, dx, dy, this.options.task);
      this.perform({ type: "change", id: selected.id, to: changed(selected, shape) }, "");
    } else {
      const from = this.cursor ?? toImage(this.viewport, [this.stage.width / 2, this.stage.height / 2]);
      this.cursor = inside([from[0] + dx, from[1] + dy], this.options.task);
      if (this.tool.mode === "plotting" || this.tool.mode === "boxing") this.tool = { ...this.tool, cursor: this.cursor };
    }
    this.changed();
  }

  /** Sets a point at the keyboard's cursor, as a click would. */
  plotAtCursor(): void {
    const at = this.cursor ?? toImage(this.viewport, [this.stage.width / 2, this.stage.height / 2]);
    this.cursor = at;
    this.dispatch({ type: "down", at, hit: { part: "ground" } });
    this.dispatch({ type: "up", at });
  }

  /** Begins a box at the keyboard's cursor, or ends the one that was begun. */
  boxAtCursor(): void {
    const at = this.cursor ?? toImage(this.viewport, [this.stage.width / 2, this.stage.height / 2]);
    this.cursor = at;
    if (this.tool.mode === "boxing") return this.dispatch({ type: "up", at });
    this.tool = { mode: "boxing", start: inside(at, this.options.task), cursor: inside(at, this.options.task) };
    this.changed();
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
    if (selected && selected.classId !== classId) {
      const shape: Shape = kind.geometry === "box" ? { kind: "box", box: bounds(selected.shape) } : selected.shape;
      this.perform({ type: "change", id: selected.id, to: { classId, ...(shape !== selected.shape && { shape }) } }, `Now ${kind.name}.`);
    } else {
      this.say(`Drawing ${kind.name}.`);
    }
    this.changed();
  }

  toggleClass(classId: string): void {
    const next = new Set(this.hiddenClassIds);
    if (!next.delete(classId)) next.add(classId);
    this.hiddenClassIds = next;
    this.changed();
  }

  setFlags(flags: Partial<Pick<DeskInstance, "crowd" | "occluded" | "truncated" | "note">>): void {
    if (this.selectedId) this.perform({ type: "change", id: this.selectedId, to: flags }, "");
    this.changed();
  }

  duplicate(): void {
    const selected = this.find(this.selectedId);
    if (!selected) return;
    const copy = { ...selected, id: this.options.newId(), origin: "drawn" as const, proposalId: null, shape: moveShape(selected.shape, 10, 10, this.options.task) };
    this.selectedId = copy.id;
    this.perform({ type: "add", instance: copy }, "Duplicated.");
    this.changed();
  }

  /** Puts an outline in place of the selected shape's geometry. */
  setOutline(id: string, shape: Shape): void {
    const instance = this.find(id);
    if (instance) this.perform({ type: "change", id, to: changed(instance, shape) }, "Outlined. Adjust it where it is off.");
    this.changed();
  }

  // ---- the tray

  get dealt(): DeskProposal | undefined {
    return this.scene.dealt[this.dealtIndex];
  }

  showDealt(index: number): void {
    const count = this.scene.dealt.length;
    this.dealtIndex = count === 0 ? 0 : (index + count) % count;
    this.changed();
  }

  take(adjust: boolean): void {
    const proposal = this.dealt;
    if (!proposal) return this.say("The tray is empty.");
    const kind = this.classes.find((entry) => entry.id === proposal.classId) ?? this.currentClass;
    const instance = taken(proposal, kind, this.options.newId());
    this.selectedId = adjust ? instance.id : null;
    this.perform({ type: "add", instance }, `${kind.name} taken.`);
    if (adjust) this.fitIfHidden(instance);
    this.changed();
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

  nameOf(instance: DeskInstance): string {
    return this.classes.find((entry) => entry.id === instance.classId)?.name ?? "shape";
  }

  say(message: string): void {
    this.message = message;
    this.changed();
  }

  private addedText(instance: DeskInstance): string {
    const kind = this.nameOf(instance);
    return instance.shape.kind === "box" ? `${kind}: box drawn.` : `${kind}: outline drawn.`;
  }

  private fitIfHidden(instance: DeskInstance): void {
    const [x, y, width, height] = bounds(instance.shape);
    const [left, top] = toImage(this.viewport, [0, 0]);
    const [right, bottom] = toImage(this.viewport, [this.stage.width, this.stage.height]);
    const isSeen = x >= left && y >= top && x + width <= right && y + height <= bottom;
    if (!isSeen || Math.max(width, height) * this.viewport.scale < 40) this.fitSelection();
  }

  private perform(command: Command, message: string): void {
    const next = perform(this.history, command);
    if (next === this.history) return;
    this.history = next;
    this.afterChange(message);
  }

  private afterChange(message: string): void {
    if (!this.find(this.selectedId)) this.selectedId = null;
    if (message) this.message = message;
    this.revision += 1;
    this.options.onChange(this.document);
    this.changed();
  }

  private makeScene(): Scene {
    const dealt = this.scene?.document === this.document ? this.scene.dealt : deal(this.options.task.proposals, this.document, this.classes);
    this.dealtIndex = Math.min(this.dealtIndex, Math.max(0, dealt.length - 1));
    return {
      document: this.document,
      viewport: this.viewport,
      tool: this.tool,
      selectedId: this.selectedId,
      currentClassId: this.currentClassId,
      hiddenClassIds: this.hiddenClassIds,
      dealt,
      dealtIndex: this.dealtIndex,
      cursor: this.cursor,
      canUndo: this.history.undoable.length > 0,
      canRedo: this.history.redoable.length > 0,
      message: this.message,
      revision: this.revision,
    };
  }

  private changed(): void {
    this.scene = this.makeScene();
    for (const listener of this.listeners) listener();
  }
}

const PROBLEM = {
  "too-few": "An outline needs three points or more; four for the extremes.",
  "too-small": "Too small to be meant. Zoom in if it is real.",
  crosses: "The outline crosses itself. Press R to mend it, or Backspace to take points back.",
} as const;
