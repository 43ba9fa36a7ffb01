"use client";

import type { DeskTask } from "@/lib/contracts/desk";
import type { DeskController } from "@/lib/desk/controller";
import { toScreen, type ScreenPoint } from "@/lib/desk/viewport";
import { useSketch } from "./useDeskScene";

const MAGNIFIER_PX = 132;
const MAGNIFIER_ZOOM = 4;

type Props = { controller: DeskController; task: DeskTask; isPanning: boolean };

/** Two hairlines through the pointer, or through the keyboard's point; a magnifier while a point is being placed. */
export function Crosshair({ controller, task, isPanning }: Props) {
  const { cursor, viewport, tool } = useSketch(controller);
  if (!cursor || isPanning) return null;
  const on = toScreen(viewport, cursor);
  return (
    <>
      <div aria-hidden className="pointer-events-none absolute inset-0 mix-blend-difference">
        <div
          className="absolute inset-x-0 top-0 h-px bg-white/55"
          style={{ transform: `translateY(${on[1]}px)` }}
        />
        <div
          className="absolute inset-y-0 left-0 w-px bg-white/55"
          style={{ transform: `translateX(${on[0]}px)` }}
        />
      </div>
      {tool.mode === "idle" || tool.mode === "pressing" ? null : (
        <Magnifier task={task} at={cursor} on={on} scale={viewport.scale} />
      )}
    </>
  );
}

type MagnifierProps = { task: DeskTask; at: readonly [number, number]; on: ScreenPoint; scale: number };

/** What lies under the pointer, larger, on the side where the hand is not. */
function Magnifier({ task, at, on, scale }: MagnifierProps) {
  const zoom = Math.max(2, Math.min(16, scale * MAGNIFIER_ZOOM));
  const half = MAGNIFIER_PX / 2;
  const beside = (along: number) => (along > MAGNIFIER_PX + 60 ? along - MAGNIFIER_PX - 36 : along + 36);
  return (
    <div
      aria-hidden
      className="pointer-events-none absolute top-0 left-0 overflow-hidden rounded-full border-2 border-white shadow-lg"
      style={{
        width: MAGNIFIER_PX,
        height: MAGNIFIER_PX,
        transform: `translate(${beside(on[0])}px, ${beside(on[1])}px)`,
      }}
    >
      <img
        src={task.imageUrl}
        alt=""
        className="absolute top-0 left-0 max-w-none origin-top-left"
        style={{
          width: task.width,
          height: task.height,
          imageRendering: "pixelated",
          transform: `translate(${half - at[0] * zoom}px, ${half - at[1] * zoom}px) scale(${zoom})`,
        }}
      />
      <div className="absolute top-1/2 left-0 h-px w-full bg-white mix-blend-difference" />
      <div className="absolute top-0 left-1/2 h-full w-px bg-white mix-blend-difference" />
    </div>
  );
}
