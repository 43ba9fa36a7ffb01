"use client";

import { useSyncExternalStore } from "react";
import type { DeskController, Scene, Sketch } from "@/lib/desk/controller";

/** What panels show; renders when a shape, the selection or a message changes. */
export function useScene(controller: DeskController): Scene {
  return useSyncExternalStore(controller.subscribe, controller.getScene, controller.getScene);
}

/** What changes with the hand; renders for each move. Only for small leaves. */
export function useSketch(controller: DeskController): Sketch {
  return useSyncExternalStore(controller.subscribeSketch, controller.getSketch, controller.getSketch);
}
