"use client";

import { Dialog } from "@/components/ui/Dialog";
import { KeyCap } from "@/components/ui/KeyCap";

type Line = { keys: string[]; does: string };

const POINTER: Line[] = [
  { keys: ["press, drag"], does: "on open ground: a box" },
  {
    keys: ["click", "click", "click"],
    does: "points of an outline; close on the first point, by Enter or by double click",
  },
  { keys: ["drag between clicks"], does: "a freehand stretch of the outline" },
  {
    keys: ["4 clicks", "X"],
    does: "the extreme points (top, left, bottom, right): a tight box and a first outline",
  },
  { keys: ["click"], does: "on a shape: select it; then drag a point, an edge or the shape" },
  { keys: ["wheel", "pinch"], does: "zoom to the pointer" },
  { keys: ["Space, drag", "two fingers", "middle button"], does: "move the sheet" },
];

const KEYS: Line[] = [
  { keys: ["1", "…", "9"], does: "class of what is selected, or of what is drawn next" },
  { keys: ["J"], does: "take the dealt proposal as it is" },
  { keys: ["K"], does: "take it and adjust it" },
  { keys: ["L"], does: "not one: send it away" },
  { keys: [",", "."], does: "look at the one before, the one after" },
  { keys: ["O"], does: "outline what is in the selected box" },
  { keys: ["R"], does: "mend an outline that crosses itself" },
  {
    keys: ["Delete"],
    does: "the point under the pointer, or the selected shape; while plotting, the last point",
  },
  { keys: ["[", "]"], does: "select the shape before, the next one" },
  { keys: ["arrows"], does: "move the selected shape by 1 px, with Shift by 10" },
  { keys: ["Ctrl Z", "Ctrl Shift Z"], does: "undo, redo" },
  { keys: ["Ctrl D"], does: "duplicate" },
  { keys: ["W", "Shift W"], does: "whole picture, whole selection" },
  { keys: ["+", "-"], does: "zoom" },
  { keys: ["I"], does: "the brief" },
  { keys: ["Ctrl Enter"], does: "hand in" },
  { keys: ["Escape"], does: "drop what is being drawn, or the selection" },
];

const BLIND: Line[] = [
  { keys: ["arrows"], does: "with nothing selected: move the crosshair by 1 px, with Shift by 10" },
  { keys: ["N"], does: "set a point of an outline at the crosshair; Enter closes it" },
  { keys: ["M"], does: "begin a box at the crosshair, and end it" },
];

/** Every gesture and key of the desk. */
export function HelpSheet({ open, onOpenChange }: { open: boolean; onOpenChange: (open: boolean) => void }) {
  return (
    <Dialog title="How to draw" open={open} onOpenChange={onOpenChange} size="wide">
      <div className="grid gap-6 sm:grid-cols-2">
        <Lines title="With the pointer" lines={POINTER} />
        <Lines title="Keys" lines={KEYS} />
        <Lines title="With the keyboard alone" lines={BLIND} />
      </div>
    </Dialog>
  );
}

function Lines({ title, lines }: { title: string; lines: Line[] }) {
  return (
    <section>
      <h3 className="mb-2 font-semibold">{title}</h3>
      <dl className="grid gap-2 text-sm">
        {lines.map((line) => (
          <div key={line.does} className="grid grid-cols-[9rem_1fr] gap-3">
            <dt className="flex flex-wrap content-start gap-1">
              {line.keys.map((key) => (
                <KeyCap key={key}>{key}</KeyCap>
              ))}
            </dt>
            <dd>{line.does}</dd>
          </div>
        ))}
      </dl>
    </section>
  );
}
