"use client";

import { useEffect, useState, type RefObject } from "react";
import type { DeskController } from "@/lib/desk/controller";
import type { ScreenPoint } from "@/lib/desk/viewport";

type Actions = {
  cursor: RefObject<ScreenPoint | null>;
  onHelp: () => void;
  onBrief: () => void;
  onHandIn: () => void;
  onOutline: () => void;
};

/** The desk's keys; the help sheet lists them. Answers whether the pan key is held. */
export function useKeys(controller: DeskController, actions: Actions): boolean {
  const [isPanning, setPanning] = useState(false);
  useEffect(() => {
    const down = (event: KeyboardEvent) => {
      const target = event.target instanceof HTMLElement ? event.target : null;
      const isTyping = target?.closest("input:not([type=range]), textarea, select, [role=dialog], [role=alertdialog]");
      if (isTyping || event.isComposing) return;
      const isButton = target?.closest("button, a, summary");
      if (isButton && (event.key === " " || event.key === "Enter")) return;
      if (event.key === " ") {
        event.preventDefault();
        if (!event.repeat) setPanning(true);
        return;
      }
      if (press(event, controller, actions)) event.preventDefault();
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
  }, [controller, actions]);
  return isPanning;
}

const ARROWS: Record<string, readonly [number, number]> = {
  ArrowLeft: [-1, 0],
  ArrowRight: [1, 0],
  ArrowUp: [0, -1],
  ArrowDown: [0, 1],
};

/** Carries out a key. Answers whether it was one of the desk's. */
function press(event: KeyboardEvent, controller: DeskController, actions: Actions): boolean {
  const { key } = event;
  if (event.ctrlKey || event.metaKey) {
    if (key.toLowerCase() === "z") {
      if (event.shiftKey) controller.redo();
      else controller.undo();
      return true;
    }
    if (key.toLowerCase() === "y") return (controller.redo(), true);
    if (key.toLowerCase() === "d") return (controller.duplicate(), true);
    if (key === "Enter") return (actions.onHandIn(), true);
    return false;
  }
  if (event.altKey) return false;
  const arrow = ARROWS[key];
  if (arrow) {
    const by = event.shiftKey ? 10 : 1;
    return (controller.nudge(arrow[0] * by, arrow[1] * by), true);
  }
  if (/^[0-9]$/.test(key)) return (controller.setClassByNumber(key === "0" ? 10 : Number(key)), true);
  switch (key) {
    case "Enter":
      return (controller.finish(), true);
    case "Escape":
      return (controller.cancel(), true);
    case "Delete":
      return (controller.deleteAt(actions.cursor.current), true);
    case "Backspace":
      return (controller.deleteAt(actions.cursor.current), true);
    case "+":
    case "=":
      return (controller.zoomCentre(1.25), true);
    case "-":
      return (controller.zoomCentre(0.8), true);
    case "[":
      return (controller.selectNext(-1), true);
    case "]":
      return (controller.selectNext(1), true);
    case ",":
      return (controller.showDealt(controller.getScene().dealtIndex - 1), true);
    case ".":
      return (controller.showDealt(controller.getScene().dealtIndex + 1), true);
    case "?":
      return (actions.onHelp(), true);
  }
  switch (key.toLowerCase()) {
    case "j":
      return (controller.take(false), true);
    case "k":
      return (controller.take(true), true);
    case "l":
      return (controller.sendAway(), true);
    case "x":
      return (controller.extremes(), true);
    case "r":
      return (controller.repair(), true);
    case "o":
      return (actions.onOutline(), true);
    case "n":
      return (controller.plotAtCursor(), true);
    case "m":
      return (controller.boxAtCursor(), true);
    case "w":
      return (event.shiftKey ? controller.fitSelection() : controller.fit(), true);
    case "i":
      return (actions.onBrief(), true);
  }
  return false;
}
