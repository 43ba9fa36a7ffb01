import { FabricObject, type StaticCanvas } from "fabric";
import type { DeskClass, DeskInstance } from "@/lib/contracts/desk";
import type { Scene, Sketch } from "@/lib/desk/controller";
import { bounds, ringsOf } from "@/lib/desk/shapes";
import { draftOf } from "@/lib/desk/tool";
import type { Viewport } from "@/lib/desk/viewport";
import { traceShape } from "@/lib/geometry/svgPath";
import type { Box, Point, Shape } from "@/lib/geometry/types";
import { classPattern, inkOn, type PatternName } from "@/components/ui/classPalette";

const CASING = "rgba(10,16,20,0.85)";
const PATTERN_CELL_PX = 12;
/** Smaller than this on screen, a shape goes without its number. */
const NUMBERED_FROM_PX = 14;
/** From so many shapes on, the finished layer is moved whole while the hand moves and painted when it rests. */
const MOVED_WHOLE_FROM = 250;
const REST_MS = 90;
const DIMMED = 0.25;

/** How the inside of a class is marked, so that classes differ without colour too. */
function patternTile(pattern: PatternName, colour: string): HTMLCanvasElement | undefined {
  if (pattern === "solid") return undefined;
  const tile = document.createElement("canvas");
  tile.width = tile.height = PATTERN_CELL_PX;
  const ink = tile.getContext("2d");
  if (!ink) return undefined;
  const n = PATTERN_CELL_PX;
  ink.fillStyle = `${colour}22`;
  ink.fillRect(0, 0, n, n);
  ink.strokeStyle = `${colour}aa`;
  ink.fillStyle = `${colour}aa`;
  ink.lineWidth = 1.5;
  const line = (x1: number, y1: number, x2: number, y2: number) => {
    ink.beginPath();
    ink.moveTo(x1, y1);
    ink.lineTo(x2, y2);
    ink.stroke();
  };
  if (pattern === "rising" || pattern === "crossed")
    for (const shift of [-n, 0, n]) line(shift, n, shift + n, 0);
  if (pattern === "falling" || pattern === "crossed")
    for (const shift of [-n, 0, n]) line(shift, 0, shift + n, n);
  if (pattern === "dots") ink.fillRect(n / 2 - 1, n / 2 - 1, 2.5, 2.5);
  if (pattern === "level") line(0, n / 2, n, n / 2);
  if (pattern === "upright") line(n / 2, 0, n / 2, n);
  if (pattern === "checked") {
    ink.fillRect(0, 0, n / 2, n / 2);
    ink.fillRect(n / 2, n / 2, n / 2, n / 2);
  }
  return tile;
}

type Look = { colour: string; number: number | null; tile: HTMLCanvasElement | undefined };

const still = { objectCaching: false, selectable: false, evented: false } as const;

/**
 * A fabric object that draws itself in px of the image, at whatever zoom its canvas has: one path for all
 * strokes, widths in screen px, nothing to rebuild when the view changes.
 */
abstract class Mark extends FabricObject {
  constructor() {
    super(still);
  }
  /** Draws on a context in image px; `px` is one screen px in image px. */
  abstract draw(ink: CanvasRenderingContext2D, px: number): void;
  abstract readonly box: Box;

  override render(ink: CanvasRenderingContext2D): void {
    const { canvas } = this;
    if (!canvas) return;
    const px = 1 / canvas.getZoom();
    const [x, y, width, height] = this.box;
    const { tl, br } = canvas.vptCoords;
    const margin = 24 * px;
    if (x - margin > br.x || y - margin > br.y || x + width + margin < tl.x || y + height + margin < tl.y)
      return;
    ink.save();
    this.draw(ink, px);
    ink.restore();
  }
}

class ShapeMark extends Mark {
  readonly box: Box;
  private readonly path: Path2D;
  isSelected = false;
  vertex: number | null = null;

  constructor(
    readonly instance: DeskInstance,
    private readonly look: Look,
  ) {
    super();
    this.box = bounds(instance.shape);
    this.path = traceShape(instance.shape, new Path2D());
  }

  draw(ink: CanvasRenderingContext2D, px: number): void {
    const { colour, tile } = this.look;
    ink.fillStyle = `${colour}33`;
    if (tile) {
      const fill = ink.createPattern(tile, "repeat");
      fill?.setTransform(new DOMMatrix([px, 0, 0, px, 0, 0]));
      if (fill) ink.fillStyle = fill;
    }
    ink.fill(this.path, "evenodd");
    ink.lineJoin = "round";
    ink.strokeStyle = CASING;
    ink.lineWidth = (this.isSelected ? 5 : 3.4) * px;
    ink.stroke(this.path);
    ink.strokeStyle = colour;
    ink.lineWidth = (this.isSelected ? 3 : 1.8) * px;
    if (this.instance.occluded) ink.setLineDash([8 * px, 5 * px]);
    ink.stroke(this.path);
    ink.setLineDash([]);
    if (this.look.number !== null && Math.max(this.box[2], this.box[3]) >= NUMBERED_FROM_PX * px)
      this.number(ink, px);
    if (this.isSelected) this.handles(ink, px);
  }

  private number(ink: CanvasRenderingContext2D, px: number): void {
    const { colour, number } = this.look;
    const [x, y] =
      this.instance.shape.kind === "box" ? this.box : (this.instance.shape.rings[0]?.[0] ?? this.box);
    ink.save();
    ink.translate(x, y);
    ink.scale(px, px);
    ink.fillStyle = colour;
    ink.strokeStyle = CASING;
    ink.lineWidth = 1;
    ink.fillRect(0, 0, 16, 16);
    ink.strokeRect(0, 0, 16, 16);
    ink.fillStyle = inkOn(colour);
    ink.font = "700 11px monospace";
    ink.textAlign = "center";
    ink.textBaseline = "middle";
    ink.fillText(String(number), 8, 8.5);
    ink.restore();
  }

  private handles(ink: CanvasRenderingContext2D, px: number): void {
    ink.fillStyle = "#ffffff";
    ink.strokeStyle = this.look.colour;
    ink.lineWidth = 2 * px;
    const dots = new Path2D();
    const points = ringsOf(this.instance.shape).flat();
    // Where points lie closer than their dots, the dots shrink so that the border stays in sight.
    const radius = (points.length > 120 ? 2.5 : 4.5) * px;
    for (const [x, y] of points) {
      dots.moveTo(x + radius, y);
      dots.arc(x, y, radius, 0, 2 * Math.PI);
    }
    ink.stroke(dots);
    ink.fill(dots);
    const held = this.vertex === null ? undefined : points[this.vertex];
    if (!held) return;
    ink.beginPath();
    ink.arc(held[0], held[1], 8 * px, 0, 2 * Math.PI);
    ink.strokeStyle = CASING;
    ink.lineWidth = 4 * px;
    ink.stroke();
    ink.strokeStyle = "#ffffff";
    ink.stroke();
  }
}

/** A shape that is dealt but not taken: white, dotted. */
class DealtMark extends Mark {
  readonly box: Box;
  private readonly path: Path2D;
  constructor(
    shape: Shape,
    private readonly colour: string,
  ) {
    super();
    this.box = bounds(shape);
    this.path = traceShape(shape, new Path2D());
  }
  draw(ink: CanvasRenderingContext2D, px: number): void {
    ink.fillStyle = "rgba(255,255,255,0.14)";
    ink.fill(this.path, "evenodd");
    ink.strokeStyle = CASING;
    ink.lineWidth = 4 * px;
    ink.stroke(this.path);
    ink.strokeStyle = this.colour;
    ink.lineWidth = 2 * px;
    ink.setLineDash([3 * px, 4 * px]);
    ink.stroke(this.path);
  }
}

/** A line of points that is being drawn, the first one marked, since a click on it closes. */
class PathMark extends Mark {
  readonly box: Box;
  constructor(
    private readonly points: readonly Point[],
    private readonly cursor: Point,
    private readonly colour: string,
  ) {
    super();
    this.box = bounds({ kind: "polygon", rings: [[...points, cursor]] });
  }
  draw(ink: CanvasRenderingContext2D, px: number): void {
    const line = new Path2D();
    [...this.points, this.cursor].forEach(([x, y], index) =>
      index === 0 ? line.moveTo(x, y) : line.lineTo(x, y),
    );
    ink.lineJoin = "round";
    ink.strokeStyle = CASING;
    ink.lineWidth = 3.6 * px;
    ink.stroke(line);
    ink.strokeStyle = this.colour;
    ink.lineWidth = 1.8 * px;
    ink.stroke(line);
    this.points.forEach(([x, y], index) => {
      ink.beginPath();
      ink.arc(x, y, (index === 0 ? 6 : 4) * px, 0, 2 * Math.PI);
      ink.fillStyle = index === 0 ? this.colour : "#ffffff";
      ink.strokeStyle = CASING;
      ink.lineWidth = 1.5 * px;
      ink.fill();
      ink.stroke();
    });
  }
}

type Layers = { settled: StaticCanvas; draft: StaticCanvas };

/**
 * Paints shapes on two fabric canvases: the finished ones, repainted when one of them or the view changes, and
 * what is being drawn, repainted for each frame. Marks are kept while their instance is the same.
 */
export class ShapePainter {
  private marks = new Map<string, ShapeMark>();
  private looks = new Map<string, Look>();
  private painted: { scene: Scene; viewport: Viewport; shapingId: string | null } | null = null;
  private resting: ReturnType<typeof setTimeout> | undefined;

  constructor(
    private readonly layers: Layers,
    private readonly classes: ReadonlyMap<string, DeskClass>,
  ) {}

  paint(scene: Scene, sketch: Sketch): void {
    const shapingId = sketch.tool.mode === "shaping" ? sketch.tool.id : null;
    const before = this.painted;
    const isSameScene = before?.scene === scene && before.shapingId === shapingId;
    const isMoved = before !== null && before.viewport !== sketch.viewport;
    if (isSameScene && isMoved && this.marks.size >= MOVED_WHOLE_FROM) {
      this.moveWhole(before.viewport, sketch.viewport);
      clearTimeout(this.resting);
      this.resting = setTimeout(() => this.paintSettled(scene, sketch, shapingId), REST_MS);
    } else if (!isSameScene || isMoved) {
      this.paintSettled(scene, sketch, shapingId);
    }
    this.paintDraft(scene, sketch);
  }

  /** Paints everything again: the canvases were resized. */
  repaint(scene: Scene, sketch: Sketch): void {
    this.painted = null;
    this.paint(scene, sketch);
  }

  dispose(): void {
    clearTimeout(this.resting);
  }

  private moveWhole(from: Viewport, to: Viewport): void {
    const k = to.scale / from.scale;
    const element = this.layers.settled.getElement();
    element.style.transformOrigin = "0 0";
    element.style.transform = `translate(${to.x - from.x * k}px, ${to.y - from.y * k}px) scale(${k})`;
  }

  private paintSettled(scene: Scene, { viewport }: Sketch, shapingId: string | null): void {
    clearTimeout(this.resting);
    const { settled } = this.layers;
    const order: ShapeMark[] = [];
    const kept = new Set<string>();
    for (const instance of scene.document.instances) {
      if (scene.hiddenClassIds.has(instance.classId) || instance.id === shapingId) continue;
      kept.add(instance.id);
      let mark = this.marks.get(instance.id);
      if (mark?.instance !== instance) {
        mark = new ShapeMark(instance, this.lookOf(instance.classId));
        this.marks.set(instance.id, mark);
      }
      mark.isSelected = instance.id === scene.selectedId;
      mark.vertex = mark.isSelected ? scene.vertex : null;
      order.push(mark);
    }
    for (const id of this.marks.keys()) if (!kept.has(id)) this.marks.delete(id);
    // The selected shape lies on top, so that its points can be seen.
    order.sort((a, b) => Number(a.isSelected) - Number(b.isSelected));
    const now = settled.getObjects();
    if (now.length !== order.length || order.some((mark, index) => now[index] !== mark)) {
      settled.remove(...now);
      settled.add(...order);
    }
    settled.getElement().style.transform = "";
    settled.getElement().style.opacity = scene.isDimmed ? String(DIMMED) : "";
    settled.setViewportTransform([viewport.scale, 0, 0, viewport.scale, viewport.x, viewport.y]);
    settled.renderAll();
    this.painted = { scene, viewport, shapingId };
  }

  private paintDraft(scene: Scene, sketch: Sketch): void {
    const { draft } = this.layers;
    const { viewport } = sketch;
    const before = draft.getObjects();
    const marks = this.draftMarks(scene, sketch);
    if (before.length > 0) draft.remove(...before);
    if (marks.length > 0) draft.add(...marks);
    if (before.length === 0 && marks.length === 0) return;
    draft.setViewportTransform([viewport.scale, 0, 0, viewport.scale, viewport.x, viewport.y]);
    draft.renderAll();
  }

  private lookOf(classId: string): Look {
    const known = this.looks.get(classId);
    if (known) return known;
    const kind = this.classes.get(classId);
    const colour = kind?.colour ?? "#888888";
    const look = {
      colour,
      number: kind?.number ?? null,
      tile: kind && patternTile(classPattern(kind.number), colour),
    };
    this.looks.set(classId, look);
    return look;
  }

  private draftMarks(scene: Scene, { tool }: Sketch): Mark[] {
    const draft = draftOf(tool);
    const target = scene.document.instances.find((instance) => instance.id === scene.intent?.id);
    const { colour } = this.lookOf(target?.classId ?? scene.currentClassId);
    if (!draft) {
      const proposal = scene.dealt[scene.dealtIndex];
      if (!proposal) return [];
      const own = proposal.classId === null ? "#ffffff" : this.lookOf(proposal.classId).colour;
      return [new DealtMark(proposal.shape, own)];
    }
    if (draft.kind === "path") return [new PathMark(draft.points, draft.cursor, colour)];
    if (draft.kind === "box") {
      const kind = scene.intent?.kind;
      const isLine = kind === "split" || kind === "inside" || kind === "outside";
      if (isLine) return [new PathMark([draft.start], draft.end, kind === "outside" ? "#ffffff" : colour)];
      return [new DealtMark({ kind: "box", box: draft.box }, colour)];
    }
    const instance = scene.document.instances.find((entry) => entry.id === draft.id);
    if (!instance) return [];
    const mark = new ShapeMark({ ...instance, shape: draft.shape }, this.lookOf(instance.classId));
    mark.isSelected = true;
    return [mark];
  }
}
