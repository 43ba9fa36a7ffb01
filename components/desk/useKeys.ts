"use client";

import { useEffect, useEffectEvent, useState, type RefObject } from "react";
import type { DeskController } from "@/lib/desk/controller";
import { actionOf, type ActionId, type KeyTable } from "@/lib/desk/keys";
import type { ScreenPoint } from "@/lib/desk/viewport";

export type KeyActions = {
  keys: KeyTable;
  cursor: RefObject<ScreenPoint | null>;
  onHelp: () => void;
  onBrief: () => void;
  onHandIn: () => void;
  onOutline: () => void;
  onCancel: () => void;
};

/** Arrows held down grow faster, image px a press: fine at first, across the picture in a few seconds. */
const ARROW_STEPS = [
  { presses: 40, px: 20 },
  { presses: 15, px: 5 },
  { presses: 0, px: 1 },
] as const;
const SHIFT_STEP_PX = 10;

/** The desk's keys; the help sheet lists them. Answers whether the pan key is held. */
export function useKeys(controller: DeskController, actions: KeyActions): boolean {
  const [isPanning, setPanning] = useState(false);
  const onKey = useEffectEvent((event: KeyboardEvent, held: number) =>
    press(event, held, controller, actions),
  );
  useEffect(() => {
    let held = 0;
    const down = (event: KeyboardEvent) => {
      const target = event.target instanceof HTMLElement ? event.target : null;
      const isTyping = target?.closest(
        "input:not([type=checkbox]), textarea, select, [role=dialog], [role=alertdialog]",
      );
      if (isTyping || event.isComposing) return;
      const isButton = target?.closest("button, a, summary, input");
      if (isButton && (event.key === " " || event.key === "Enter")) return;
      held = event.repeat ? held + 1 : 0;
      if (event.key === " ") {
        event.preventDefault();
        if (!event.repeat) setPanning(true);
        return;
      }
      if (onKey(event, held)) event.preventDefault();
    };
    const up = (event: KeyboardEvent) => event.key === " " && setPanning(false);
    const blur = () => setPanning(false);
    window.addEventListener("keydown", down);
    window.addEventListener("keyup", up);
    window.addEventListener("blur", blur);
    return () => {
      window.removeEventListener("keydown", down);
      window.removeEventListener("keyup", up);
      window.removeEventListener("blur", blur);
    };
  }, []);
  return isPanning;
}

const ARROWS: Record<string, readonly [number, number]> = {
  ArrowLeft: [-1, 0],
  ArrowRight: [1, 0],
  ArrowUp: [0, -1],
  ArrowDown: [0, 1],
};

/** Carries out a key. Answers whether it was one of the desk's. */
function press(event: KeyboardEvent, held: number, controller: DeskController, actions: KeyActions): boolean {
  const { key } = event;
  if (event.ctrlKey || event.metaKey) return pressWithControl(event, controller, actions);
  if (event.altKey) return false;
  const arrow = ARROWS[key];
  if (arrow) {
    const by = event.shiftKey ? SHIFT_STEP_PX : (ARROW_STEPS.find((step) => held >= step.presses)?.px ?? 1);
    return (controller.nudge(arrow[0] * by, arrow[1] * by), true);
  }
  if (/^[0-9]$/.test(key)) return (controller.setClassByNumber(key === "0" ? 10 : Number(key)), true);
  if (key === "Enter") return (controller.finish(), true);
  if (key === "Delete" || key === "Backspace") return (controller.deleteAt(actions.cursor.current), true);
  if (key === "Escape") return (actions.onCancel(), true);
  const action = actionOf(actions.keys, key);
  if (!action) return false;
  act(action, event.shiftKey, controller, actions);
  return true;
}

function pressWithControl(event: KeyboardEvent, controller: DeskController, actions: KeyActions): boolean {
  const key = event.key.toLowerCase();
  if (key === "z") return (event.shiftKey ? controller.redo() : controller.undo(), true);
  if (key === "y") return (controller.redo(), true);
  if (key === "d") return (controller.duplicate(), true);
  if (key === "enter") return (actions.onHandIn(), true);
  return false;
}

function act(action: ActionId, isShifted: boolean, controller: DeskController, actions: KeyActions): void {
  switch (action) {
    case "take":
      return controller.take(false);
    case "takeAndAdjust":
      return controller.take(true);
    case "sendAway":
      return controller.sendAway();
    case "dealtBefore":
      return controller.showDealt(controller.getScene().dealtIndex - 1);
    case "dealtAfter":
      return controller.showDealt(controller.getScene().dealtIndex + 1);
    case "extremes":
      return controller.extremes();
    case "mend":
      return controller.repair();
    case "plotAtCursor":
      return controller.plotAtCursor();
    case "boxAtCursor":
      return controller.boxAtCursor();
    case "selectBefore":
      return controller.selectNext(-1);
    case "selectAfter":
      return controller.selectNext(1);
    case "vertexAfter":
      return controller.holdVertex(isShifted ? -1 : 1);
    case "outline":
      return actions.onOutline();
    case "strokeInside":
      return controller.intend("inside");
    case "strokeOutside":
      return controller.intend("outside");
    case "extend":
    case "hole":
    case "split":
    case "join":
      return controller.intend(action);
    case "shareBorder":
      return controller.shareBorder();
    case "occluded":
    case "truncated":
    case "crowd":
      return controller.toggleFlag(action);
    case "fit":
      return isShifted ? controller.fitSelection() : controller.fit();
    case "zoomIn":
      return controller.zoomByKey(1.25);
    case "zoomOut":
      return controller.zoomByKey(0.8);
    case "hideClass":
      return controller.toggleClass(controller.currentClass.id);
    case "dim":
      return controller.toggleDim();
    case "brief":
      return actions.onBrief();
    case "help":
      return actions.onHelp();
  }
}
