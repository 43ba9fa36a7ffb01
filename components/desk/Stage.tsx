"use client";

import { StaticCanvas } from "fabric";
import { useEffect, useMemo, useRef, useState, type PointerEvent as ReactPointerEvent } from "react";
import type { DeskTask } from "@/lib/contracts/desk";
import type { DeskController, PointerKind } from "@/lib/desk/controller";
import type { ScreenPoint } from "@/lib/desk/viewport";
import { Crosshair } from "./Crosshair";
import { ShapePainter } from "./paint";
import type { Look } from "./ViewPanel";

type Props = {
  controller: DeskController;
  task: DeskTask;
  look: Look;
  isPanning: boolean;
  onScreenCursor: (at: ScreenPoint | null) => void;
};

/** From this zoom on the picture shows its pixels as squares. */
const PIXELS_FROM = 4;
/** From this zoom on a grid lies between the pixels. */
const GRID_FROM = 10;
/** Where a pen was seen so lately, a touch is the palm of the hand that holds it. */
const PALM_MS = 1200;

/**
 * The sheet in the middle: the picture below, the shapes of the fabric stage above, one pointer for both. It
 * paints outside React: a move of the hand costs a canvas frame and no render.
 */
export function Stage({ controller, task, look, isPanning, onScreenCursor }: Props) {
  const frame = useRef<HTMLDivElement>(null);
  const image = useRef<HTMLImageElement>(null);
  const grid = useRef<HTMLDivElement>(null);
  const settledElement = useRef<HTMLCanvasElement>(null);
  const draftElement = useRef<HTMLCanvasElement>(null);
  const pointers = useRef(new Map<number, ScreenPoint>());
  const panning = useRef<ScreenPoint | null>(null);
  const pinch = useRef<{ distance: number; middle: ScreenPoint } | null>(null);
  const penSeenAtMs = useRef(-Infinity);
  const [imageState, setImageState] = useState<"loading" | "ready" | "failed">("loading");
  const classes = useMemo(() => new Map(task.classes.map((kind) => [kind.id, kind])), [task.classes]);

  useEffect(() => {
    const holder = frame.current;
    if (!holder || !settledElement.current || !draftElement.current) return;
    const options = { renderOnAddRemove: false, enableRetinaScaling: true };
    const settled = new StaticCanvas(settledElement.current, options);
    const draft = new StaticCanvas(draftElement.current, options);
    const painter = new ShapePainter({ settled, draft }, classes);
    let frameId = 0;
    const paint = () => {
      frameId = 0;
      const sketch = controller.getSketch();
      const { viewport, tool } = sketch;
      if (image.current) {
        image.current.style.transform = `translate(${viewport.x}px, ${viewport.y}px) scale(${viewport.scale})`;
        image.current.style.imageRendering = viewport.scale >= PIXELS_FROM ? "pixelated" : "auto";
      }
      if (grid.current) {
        grid.current.hidden = viewport.scale < GRID_FROM;
        grid.current.style.backgroundSize = `${viewport.scale}px ${viewport.scale}px`;
        grid.current.style.backgroundPosition = `${viewport.x}px ${viewport.y}px`;
      }
      painter.paint(controller.getScene(), sketch);
      // Readable by tests and by a debug overlay.
      Object.assign(holder.dataset, { tool: tool.mode, scale: viewport.scale, x: viewport.x, y: viewport.y });
    };
    const schedule = () => (frameId ||= requestAnimationFrame(paint));
    const unsubscribe = [controller.subscribe(schedule), controller.subscribeSketch(schedule)];
    const observer = new ResizeObserver(() => {
      const { width, height } = holder.getBoundingClientRect();
      settled.setDimensions({ width, height });
      draft.setDimensions({ width, height });
      controller.resize(width, height);
      painter.repaint(controller.getScene(), controller.getSketch());
      schedule();
    });
    observer.observe(holder);
    const wheel = (event: WheelEvent) => {
      event.preventDefault();
      const rect = holder.getBoundingClientRect();
      const step = event.deltaMode === 1 ? event.deltaY * 30 : event.deltaY;
      // A pinch on a track pad arrives as a wheel with Ctrl, in finer steps.
      const rate = event.ctrlKey ? 0.01 : 0.0016;
      controller.zoom([event.clientX - rect.left, event.clientY - rect.top], Math.exp(-step * rate));
    };
    holder.addEventListener("wheel", wheel, { passive: false });
    return () => {
      cancelAnimationFrame(frameId);
      for (const stop of unsubscribe) stop();
      observer.disconnect();
      holder.removeEventListener("wheel", wheel);
      painter.dispose();
      void settled.dispose();
      void draft.dispose();
    };
  }, [controller, classes]);

  const at = (event: ReactPointerEvent): ScreenPoint => {
    const rect = event.currentTarget.getBoundingClientRect();
    return [event.clientX - rect.left, event.clientY - rect.top];
  };
  const kindOf = (event: ReactPointerEvent): PointerKind =>
    event.pointerType === "touch" ? "touch" : event.pointerType === "pen" ? "pen" : "mouse";
  const isPalm = (event: ReactPointerEvent) => {
    if (event.pointerType === "pen") penSeenAtMs.current = event.timeStamp;
    return event.pointerType === "touch" && event.timeStamp - penSeenAtMs.current < PALM_MS;
  };

  function onPointerDown(event: ReactPointerEvent<HTMLDivElement>): void {
    if (isPalm(event)) return;
    event.currentTarget.focus({ preventScroll: true });
    event.currentTarget.setPointerCapture(event.pointerId);
    const point = at(event);
    pointers.current.set(event.pointerId, point);
    if (pointers.current.size === 2) {
      // A second finger: the press of the first is dropped, and both move the sheet.
      controller.interrupt();
      pinch.current = pinchOf([...pointers.current.values()]);
      return;
    }
    if (isPanning || event.button === 1) {
      event.preventDefault();
      panning.current = point;
      return;
    }
    if (event.button === 0) controller.pointerDown(point, kindOf(event), event.shiftKey);
  }

  function onPointerMove(event: ReactPointerEvent<HTMLDivElement>): void {
    if (isPalm(event)) return;
    const point = at(event);
    onScreenCursor(point);
    if (pointers.current.has(event.pointerId)) pointers.current.set(event.pointerId, point);
    if (pinch.current) {
      if (pointers.current.size < 2) return;
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
    if (!pointers.current.delete(event.pointerId)) return;
    if (pinch.current) {
      // The finger that stays must not draw a line where the other was.
      if (pointers.current.size === 0) pinch.current = null;
      return;
    }
    if (panning.current) {
      panning.current = null;
      return;
    }
    if (event.button === 0) controller.pointerUp(at(event), kindOf(event));
  }

  function onPointerCancel(event: ReactPointerEvent<HTMLDivElement>): void {
    if (!pointers.current.delete(event.pointerId)) return;
    if (pointers.current.size === 0) pinch.current = null;
    panning.current = null;
    controller.interrupt();
  }

  return (
    <div
      ref={frame}
      role="application"
      aria-label={`${task.imageName}: drawing surface. Press question mark for the keys.`}
      aria-roledescription="drawing surface"
      tabIndex={0}
      data-desk-stage=""
      className="bg-stage focus-visible:outline-focus relative size-full touch-none overflow-hidden outline-none select-none focus-visible:outline-3 focus-visible:-outline-offset-3"
      style={{ cursor: isPanning ? "grab" : "crosshair" }}
      onPointerDown={onPointerDown}
      onPointerMove={onPointerMove}
      onPointerUp={onPointerUp}
      onPointerCancel={onPointerCancel}
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
        ref={(element) => {
          image.current = element;
          if (element?.complete && element.naturalWidth > 0 && imageState === "loading")
            setImageState("ready");
        }}
        src={task.imageUrl}
        alt=""
        draggable={false}
        onLoad={() => setImageState("ready")}
        onError={() => setImageState("failed")}
        className="pointer-events-none absolute top-0 left-0 max-w-none origin-top-left"
        style={{ width: task.width, height: task.height, filter: filterOf(look) }}
      />
      <GammaFilter gamma={look.gamma} />
      <div
        ref={grid}
        hidden
        aria-hidden
        className="pointer-events-none absolute inset-0 opacity-30"
        style={{
          backgroundImage:
            "linear-gradient(to right, #fff 1px, transparent 1px), linear-gradient(to bottom, #fff 1px, transparent 1px)",
        }}
      />
      <div className="pointer-events-none absolute inset-0">
        <canvas ref={settledElement} />
      </div>
      <div className="pointer-events-none absolute inset-0">
        <canvas ref={draftElement} />
      </div>
      <Crosshair controller={controller} task={task} isPanning={isPanning} />
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

function filterOf({ brightness, contrast, gamma }: Look): string {
  const parts = [
    gamma === 1 ? "" : "url(#desk-gamma)",
    brightness === 1 ? "" : `brightness(${brightness})`,
    contrast === 1 ? "" : `contrast(${contrast})`,
  ];
  return parts.filter(Boolean).join(" ") || "none";
}

/** CSS has no gamma; this filter of the page has. */
function GammaFilter({ gamma }: { gamma: number }) {
  const curve = { type: "gamma", exponent: 1 / gamma } as const;
  return (
    <svg aria-hidden className="absolute size-0">
      <filter id="desk-gamma" colorInterpolationFilters="sRGB">
        <feComponentTransfer>
          <feFuncR {...curve} />
          <feFuncG {...curve} />
          <feFuncB {...curve} />
        </feComponentTransfer>
      </filter>
    </svg>
  );
}
