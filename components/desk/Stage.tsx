"use client";

import { StaticCanvas } from "fabric";
import { useEffect, useMemo, useRef, useState, type PointerEvent as ReactPointerEvent } from "react";
import type { DeskTask } from "@/lib/contracts/desk";
import type { DeskController, PointerKind, Scene } from "@/lib/desk/controller";
import { toScreen, type ScreenPoint } from "@/lib/desk/viewport";
import { ShapePainter } from "./paint";

type Props = {
  controller: DeskController;
  scene: Scene;
  task: DeskTask;
  look: { brightness: number; contrast: number };
  isPanning: boolean;
  onScreenCursor: (at: ScreenPoint | null) => void;
};

/** From this zoom on the picture shows its pixels as squares. */
const PIXELS_FROM = 4;
/** From this zoom on a grid lies between the pixels. */
const GRID_FROM = 10;
const MAGNIFIER_PX = 132;
const MAGNIFIER_ZOOM = 4;

/** The sheet in the middle: the picture below, the shapes of the fabric stage above, one pointer for both. */
export function Stage({ controller, scene, task, look, isPanning, onScreenCursor }: Props) {
  const frame = useRef<HTMLDivElement>(null);
  const canvasElement = useRef<HTMLCanvasElement>(null);
  const fabric = useRef<{ canvas: StaticCanvas; painter: ShapePainter } | null>(null);
  const pointers = useRef(new Map<number, ScreenPoint>());
  const panning = useRef<ScreenPoint | null>(null);
  const pinch = useRef<{ distance: number; middle: ScreenPoint } | null>(null);
  const [imageState, setImageState] = useState<"loading" | "ready" | "failed">("loading");
  const classes = useMemo(() => new Map(task.classes.map((kind) => [kind.id, kind])), [task.classes]);
  const { viewport } = scene;

  useEffect(() => {
    const element = canvasElement.current;
    const holder = frame.current;
    if (!element || !holder) return;
    const canvas = new StaticCanvas(element, { renderOnAddRemove: false, enableRetinaScaling: true });
    fabric.current = { canvas, painter: new ShapePainter(canvas, classes) };
    const observer = new ResizeObserver(() => {
      const { width, height } = holder.getBoundingClientRect();
      canvas.setDimensions({ width, height });
      controller.resize(width, height);
    });
    observer.observe(holder);
    const wheel = (event: WheelEvent) => {
      event.preventDefault();
      const rect = holder.getBoundingClientRect();
      const step = event.deltaMode === 1 ? event.deltaY * 30 : event.deltaY;
      controller.zoom([event.clientX - rect.left, event.clientY - rect.top], Math.exp(-step * 0.0016));
    };
    holder.addEventListener("wheel", wheel, { passive: false });
    return () => {
      observer.disconnect();
      holder.removeEventListener("wheel", wheel);
      fabric.current = null;
      void canvas.dispose();
    };
  }, [controller, classes]);

  useEffect(() => {
    fabric.current?.painter.paint(scene);
  }, [scene]);

  const at = (event: ReactPointerEvent): ScreenPoint => {
    const rect = event.currentTarget.getBoundingClientRect();
    return [event.clientX - rect.left, event.clientY - rect.top];
  };
  const kindOf = (event: ReactPointerEvent): PointerKind =>
    event.pointerType === "touch" ? "touch" : event.pointerType === "pen" ? "pen" : "mouse";

  function onPointerDown(event: ReactPointerEvent<HTMLDivElement>): void {
    event.currentTarget.focus({ preventScroll: true });
    event.currentTarget.setPointerCapture(event.pointerId);
    const point = at(event);
    pointers.current.set(event.pointerId, point);
    if (pointers.current.size === 2) {
      // A second finger: what the first began is dropped, and both move the sheet.
      controller.dispatch({ type: "cancel" });
      pinch.current = pinchOf([...pointers.current.values()]);
      return;
    }
    if (isPanning || event.button === 1) {
      event.preventDefault();
      panning.current = point;
      return;
    }
    if (event.button === 0) controller.pointerDown(point, kindOf(event));
  }

  function onPointerMove(event: ReactPointerEvent<HTMLDivElement>): void {
    const point = at(event);
    onScreenCursor(point);
    if (pointers.current.has(event.pointerId)) pointers.current.set(event.pointerId, point);
    if (pinch.current && pointers.current.size >= 2) {
      const next = pinchOf([...pointers.current.values()]);
      controller.pan(next.middle[0] - pinch.current.middle[0], next.middle[1] - pinch.current.middle[1]);
      controller.zoom(next.middle, next.distance / Math.max(1, pinch.current.distance));
      pinch.current = next;
      return;
    }
    if (panning.current) {
      controller.pan(point[0] - panning.current[0], point[1] - panning.current[1]);
      panning.current = point;
      return;
    }
    controller.pointerMove(point, kindOf(event));
  }

  function onPointerUp(event: ReactPointerEvent<HTMLDivElement>): void {
    pointers.current.delete(event.pointerId);
    if (pinch.current) {
      if (pointers.current.size < 2) pinch.current = null;
      return;
    }
    if (panning.current) {
      panning.current = null;
      return;
    }
    if (event.button === 0) controller.pointerUp(at(event), kindOf(event));
  }

  const placing =
    scene.tool.mode === "plotting" ||
    scene.tool.mode === "plotting-press" ||
    scene.tool.mode === "boxing" ||
    scene.tool.mode === "shaping";
  const cursorOnScreen = scene.cursor ? toScreen(viewport, scene.cursor) : null;
  return (
    <div
      ref={frame}
      role="application"
      aria-label={`${task.imageName}: drawing surface. Press question mark for the keys.`}
      aria-roledescription="drawing surface"
      tabIndex={0}
      data-desk-stage=""
      data-tool={scene.tool.mode}
      data-scale={viewport.scale}
      data-x={viewport.x}
      data-y={viewport.y}
      className="bg-stage focus-visible:outline-focus relative size-full touch-none overflow-hidden outline-none select-none focus-visible:outline-3 focus-visible:-outline-offset-3"
      style={{ cursor: isPanning ? "grab" : "crosshair" }}
      onPointerDown={onPointerDown}
      onPointerMove={onPointerMove}
      onPointerUp={onPointerUp}
      onPointerCancel={(event) => {
        pointers.current.delete(event.pointerId);
        pinch.current = panning.current = null;
        controller.dispatch({ type: "cancel" });
      }}
      onPointerLeave={() => {
        onScreenCursor(null);
        controller.pointerLeave();
      }}
      onDoubleClick={(event) => {
        const rect = event.currentTarget.getBoundingClientRect();
        controller.doubleClick([event.clientX - rect.left, event.clientY - rect.top], "mouse");
      }}
      onContextMenu={(event) => event.preventDefault()}
    >
      <img
        src={task.imageUrl}
        alt=""
        draggable={false}
        onLoad={() => setImageState("ready")}
        onError={() => setImageState("failed")}
        ref={(element) => {
          if (element?.complete && element.naturalWidth > 0 && imageState === "loading")
            setImageState("ready");
        }}
        className="pointer-events-none absolute top-0 left-0 max-w-none origin-top-left"
        style={{
          width: task.width,
          height: task.height,
          transform: `translate(${viewport.x}px, ${viewport.y}px) scale(${viewport.scale})`,
          imageRendering: viewport.scale >= PIXELS_FROM ? "pixelated" : "auto",
          filter:
            look.brightness === 1 && look.contrast === 1
              ? "none"
              : `brightness(${look.brightness}) contrast(${look.contrast})`,
        }}
      />
      {viewport.scale >= GRID_FROM ? (
        <div
          aria-hidden
          className="pointer-events-none absolute inset-0 opacity-30"
          style={{
            backgroundImage:
              "linear-gradient(to right, #fff 1px, transparent 1px), linear-gradient(to bottom, #fff 1px, transparent 1px)",
            backgroundSize: `${viewport.scale}px ${viewport.scale}px`,
            backgroundPosition: `${viewport.x}px ${viewport.y}px`,
          }}
        />
      ) : null}
      <div className="pointer-events-none absolute inset-0">
        <canvas ref={canvasElement} />
      </div>
      {cursorOnScreen && !isPanning ? (
        <div aria-hidden className="pointer-events-none absolute inset-0 mix-blend-difference">
          <div className="absolute inset-x-0 h-px bg-white/55" style={{ top: cursorOnScreen[1] }} />
          <div className="absolute inset-y-0 w-px bg-white/55" style={{ left: cursorOnScreen[0] }} />
        </div>
      ) : null}
      {placing && scene.cursor && cursorOnScreen ? (
        <Magnifier task={task} at={scene.cursor} on={cursorOnScreen} scale={viewport.scale} />
      ) : null}
      {imageState === "loading" ? (
        <p className="text-stage-ink absolute inset-0 grid place-items-center">
          The picture is on its way ...
        </p>
      ) : null}
      {imageState === "failed" ? (
        <p role="alert" className="text-stage-ink absolute inset-0 grid place-items-center p-6 text-center">
          The picture could not be loaded. Your drawing is safe; reload the page to try again.
        </p>
      ) : null}
    </div>
  );
}

function pinchOf(points: readonly ScreenPoint[]): { distance: number; middle: ScreenPoint } {
  const [a = [0, 0], b = [0, 0]] = points;
  return { distance: Math.hypot(a[0] - b[0], a[1] - b[1]), middle: [(a[0] + b[0]) / 2, (a[1] + b[1]) / 2] };
}

/** What lies under the pointer, larger, on the side where the hand is not. */
function Magnifier({
  task,
  at,
  on,
  scale,
}: {
  task: DeskTask;
  at: readonly [number, number];
  on: ScreenPoint;
  scale: number;
}) {
  const zoom = Math.max(2, Math.min(16, scale * MAGNIFIER_ZOOM));
  const half = MAGNIFIER_PX / 2;
  return (
    <div
      aria-hidden
      className="pointer-events-none absolute overflow-hidden rounded-full border-2 border-white shadow-lg"
      style={{
        width: MAGNIFIER_PX,
        height: MAGNIFIER_PX,
        left: on[0] > MAGNIFIER_PX + 60 ? on[0] - MAGNIFIER_PX - 36 : on[0] + 36,
        top: on[1] > MAGNIFIER_PX + 60 ? on[1] - MAGNIFIER_PX - 36 : on[1] + 36,
      }}
    >
      <div
        className="absolute inset-0"
        style={{
          backgroundImage: `url(${task.imageUrl})`,
          backgroundSize: `${task.width * zoom}px ${task.height * zoom}px`,
          backgroundPosition: `${half - at[0] * zoom}px ${half - at[1] * zoom}px`,
          backgroundRepeat: "no-repeat",
          imageRendering: "pixelated",
        }}
      />
      <div className="absolute top-1/2 left-0 h-px w-full bg-white mix-blend-difference" />
      <div className="absolute top-0 left-1/2 h-full w-px bg-white mix-blend-difference" />
    </div>
  );
}
