"use client";

import type { PointerEvent } from "react";
import type { DeskTask } from "@/lib/contracts/desk";
import type { DeskController } from "@/lib/desk/controller";
import { useSketch } from "./useDeskScene";

const SIDE_PX = 140;

/** The whole picture, small, with a frame around what the stage shows; only while something is out of sight. */
export function Minimap({ controller, task }: { controller: DeskController; task: DeskTask }) {
  useSketch(controller);
  const [left, top, width, height] = controller.shownBox;
  const isWhole = left <= 0 && top <= 0 && left + width >= task.width && top + height >= task.height;
  if (isWhole) return null;
  const scale = SIDE_PX / Math.max(task.width, task.height);
  const go = (event: PointerEvent<HTMLDivElement>) => {
    if (event.buttons !== 1) return;
    const rect = event.currentTarget.getBoundingClientRect();
    controller.centreOn([(event.clientX - rect.left) / scale, (event.clientY - rect.top) / scale]);
  };
  return (
    <div
      aria-hidden
      onPointerDown={go}
      onPointerMove={go}
      className="border-ink bg-stage absolute end-2 top-2 hidden touch-none overflow-hidden border sm:block"
      style={{ width: task.width * scale, height: task.height * scale }}
    >
      <img src={task.imageUrl} alt="" draggable={false} className="size-full" />
      <div
        className="absolute border-2 border-white shadow-[0_0_0_999px_rgba(10,16,20,0.45)]"
        style={{ left: left * scale, top: top * scale, width: width * scale, height: height * scale }}
      />
    </div>
  );
}
