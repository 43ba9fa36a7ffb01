import { Circle, Group, Path, Pattern, Rect, StaticCanvas, FabricText, type FabricObject } from "fabric";
import type { DeskClass, DeskInstance } from "@/lib/contracts/desk";
import type { Scene } from "@/lib/desk/controller";
import { corners } from "@/lib/desk/shapes";
import { draftOf } from "@/lib/desk/tool";
import type { Point, Shape } from "@/lib/geometry/types";
import { inkOn } from "@/components/ui/classPalette";

const CASING = "rgba(10,16,20,0.85)";
const PATTERN_CELL_PX = 12;

/** How the inside of a class is marked, so that classes differ without colour too. */
function patternFill(pattern: string, colour: string): Pattern | string {
  if (pattern === "solid") return `${colour}33`;
  const tile = document.createElement("canvas");
  tile.width = tile.height = PATTERN_CELL_PX;
  const ink = tile.getContext("2d");
  if (!ink) return `${colour}33`;
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
  return new Pattern({ source: tile, repeat: "repeat" });
}

function pathText(shape: Shape): string {
  if (shape.kind === "box") {
    const [x, y, width, height] = shape.box;
    return `M${x} ${y}h${width}v${height}h${-width}z`;
  }
  return shape.rings.map((ring) => `M${ring.map(([x, y]) => `${x} ${y}`).join("L")}z`).join("");
}

const common = {
  objectCaching: false,
  selectable: false,
  evented: false,
  originX: "left",
  originY: "top",
} as const;

/** Paints a scene's shapes on a fabric canvas. Objects are kept while their instance is the same. */
export class ShapePainter {
  private objects = new Map<string, { instance: DeskInstance; look: string; parts: FabricObject[] }>();
  private draft: FabricObject[] = [];
  private patterns = new Map<string, Pattern | string>();

  constructor(
    private readonly canvas: StaticCanvas,
    private readonly classes: ReadonlyMap<string, DeskClass>,
  ) {}

  paint(scene: Scene): void {
    const { viewport, document, selectedId, hiddenClassIds } = scene;
    this.canvas.setViewportTransform([viewport.scale, 0, 0, viewport.scale, viewport.x, viewport.y]);
    const shaping = scene.tool.mode === "shaping" ? scene.tool.id : null;
    const kept = new Set<string>();
    for (const instance of document.instances) {
      if (hiddenClassIds.has(instance.classId) || instance.id === shaping) continue;
      kept.add(instance.id);
      const isSelected = instance.id === selectedId;
      const look = `${isSelected}/${viewport.scale}`;
      const known = this.objects.get(instance.id);
      if (known?.instance === instance && known.look === look) continue;
      if (known) this.canvas.remove(...known.parts);
      const parts = this.make(instance, isSelected, viewport.scale);
      this.canvas.add(...parts);
      this.objects.set(instance.id, { instance, look, parts });
    }
    for (const [id, { parts }] of this.objects) {
      if (kept.has(id)) continue;
      this.canvas.remove(...parts);
      this.objects.delete(id);
    }
    if (this.draft.length > 0) this.canvas.remove(...this.draft);
    this.draft = this.makeDraft(scene);
    if (this.draft.length > 0) this.canvas.add(...this.draft);
    this.canvas.requestRenderAll();
  }

  private fillOf(kind: DeskClass | undefined): Pattern | string {
    const key = kind ? `${kind.pattern}/${kind.colour}` : "none";
    const known = this.patterns.get(key);
    if (known) return known;
    const fill = patternFill(kind?.pattern ?? "solid", kind?.colour ?? "#888888");
    this.patterns.set(key, fill);
    return fill;
  }

  private make(instance: DeskInstance, isSelected: boolean, scale: number): FabricObject[] {
    const kind = this.classes.get(instance.classId);
    const colour = kind?.colour ?? "#888888";
    const px = 1 / scale;
    const path = pathText(instance.shape);
    const parts: FabricObject[] = [
      new Path(path, {
        ...common,
        fill: this.fillOf(kind),
        fillRule: "evenodd",
        stroke: CASING,
        strokeWidth: (isSelected ? 5 : 3.4) * px,
      }),
      new Path(path, {
        ...common,
        fill: "",
        stroke: colour,
        strokeWidth: (isSelected ? 3 : 1.8) * px,
        ...(instance.occluded && { strokeDashArray: [8 * px, 5 * px] }),
      }),
    ];
    const [x, y] =
      instance.shape.kind === "box" ? instance.shape.box : (instance.shape.rings[0]?.[0] ?? [0, 0]);
    if (kind) {
      parts.push(
        new Group(
          [
            new Rect({
              ...common,
              left: 0,
              top: 0,
              width: 16,
              height: 16,
              fill: colour,
              stroke: CASING,
              strokeWidth: 1,
            }),
            new FabricText(String(kind.number), {
              ...common,
              left: 8,
              top: 8,
              originX: "center",
              originY: "center",
              fontSize: 11,
              fontWeight: 700,
              fontFamily: "monospace",
              fill: inkOn(colour),
            }),
          ],
          { ...common, left: x, top: y, scaleX: px, scaleY: px },
        ),
      );
    }
    if (isSelected) parts.push(...this.handles(instance.shape, colour, px));
    return parts;
  }

  private handles(shape: Shape, colour: string, px: number): FabricObject[] {
    const points: readonly Point[] = shape.kind === "box" ? corners(shape.box) : shape.rings.flat();
    return points.map(
      ([x, y]) =>
        new Circle({
          ...common,
          left: x,
          top: y,
          originX: "center",
          originY: "center",
          radius: 4.5 * px,
          fill: "#ffffff",
          stroke: colour,
          strokeWidth: 2 * px,
        }),
    );
  }

  private makeDraft(scene: Scene): FabricObject[] {
    const draft = draftOf(scene.tool);
    const kind = this.classes.get(scene.currentClassId);
    const colour = kind?.colour ?? "#888888";
    const px = 1 / scene.viewport.scale;
    const proposal = scene.dealt[scene.dealtIndex];
    const parts: FabricObject[] = [];
    if (proposal && !draft) {
      const own = this.classes.get(proposal.classId ?? "")?.colour ?? "#ffffff";
      const path = pathText(proposal.shape);
      parts.push(
        new Path(path, {
          ...common,
          fill: "rgba(255,255,255,0.14)",
          fillRule: "evenodd",
          stroke: CASING,
          strokeWidth: 4 * px,
        }),
        new Path(path, {
          ...common,
          fill: "",
          stroke: own,
          strokeWidth: 2 * px,
          strokeDashArray: [3 * px, 4 * px],
        }),
      );
    }
    if (draft?.kind === "box") {
      const [left, top, width, height] = draft.box;
      parts.push(
        new Rect({
          ...common,
          left,
          top,
          width,
          height,
          fill: `${colour}22`,
          stroke: colour,
          strokeWidth: 2 * px,
        }),
      );
    } else if (draft?.kind === "shape") {
      const instance = scene.document.instances.find((entry) => entry.id === draft.id);
      if (instance) parts.push(...this.make({ ...instance, shape: draft.shape }, true, scene.viewport.scale));
    } else if (draft?.kind === "path") {
      const points = [...draft.points, draft.cursor];
      const path = `M${points.map(([x, y]) => `${x} ${y}`).join("L")}`;
      parts.push(
        new Path(path, { ...common, fill: "", stroke: CASING, strokeWidth: 3.6 * px }),
        new Path(path, { ...common, fill: "", stroke: colour, strokeWidth: 1.8 * px }),
        ...draft.points.map(
          ([x, y], index) =>
            new Circle({
              ...common,
              left: x,
              top: y,
              originX: "center",
              originY: "center",
              radius: (index === 0 ? 6 : 4) * px,
              fill: index === 0 ? colour : "#ffffff",
              stroke: CASING,
              strokeWidth: 1.5 * px,
            }),
        ),
      );
    }
    return parts;
  }
}
