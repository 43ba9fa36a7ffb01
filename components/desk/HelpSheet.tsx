"use client";

import { useState } from "react";
import { Button } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { Dialog } from "@/components/ui/Dialog";
import { KeyCap } from "@/components/ui/KeyCap";
import { DEFAULT_KEYS, KEY_GROUPS, rebind, type ActionId } from "@/lib/desk/keys";
import type { usePreferences } from "./usePreferences";

type Line = { keys: string[]; does: string };

const POINTER: Line[] = [
  { keys: ["press, drag"], does: "on open ground: a box" },
  {
    keys: ["click", "click", "click"],
    does: "points of an outline; close on the first point, by Enter or by double click",
  },
  { keys: ["drag after a click"], does: "a freehand stretch of the outline" },
  {
    keys: ["4 clicks"],
    does: "top, left, bottom and right of an object: a tight box. For an outline, say so by the key for extremes",
  },
  { keys: ["click"], does: "on a shape: select it; then drag a point, an edge or the shape" },
  { keys: ["Shift, press"], does: "draw on top of a shape instead of selecting it" },
  { keys: ["wheel", "pinch"], does: "zoom to the pointer" },
  { keys: ["Space, drag", "two fingers", "middle button"], does: "move the sheet" },
];

const FIXED: Line[] = [
  { keys: ["1", "…", "9"], does: "class of what is selected, or of what is drawn next" },
  {
    keys: ["Delete"],
    does: "the held point, the point under the pointer, or the shape; while plotting, the last point",
  },
  {
    keys: ["arrows"],
    does: "move the held point, the shape, or with nothing selected the crosshair; Shift: by 10 px",
  },
  { keys: ["Ctrl Z", "Ctrl Shift Z"], does: "undo, redo" },
  { keys: ["Ctrl D"], does: "duplicate" },
  { keys: ["Ctrl Enter"], does: "hand in" },
  { keys: ["Escape"], does: "drop what is being drawn, or the selection" },
];

type Props = {
  open: boolean;
  onOpenChange: (open: boolean) => void;
  preferences: ReturnType<typeof usePreferences>;
};

/** Every gesture and key of the desk; letters can be changed here. */
export function HelpSheet({ open, onOpenChange, preferences }: Props) {
  const { keys, setKeys, side, setSide } = preferences;
  const [changing, setChanging] = useState<ActionId | null>(null);
  const [problem, setProblem] = useState("");

  function take(event: React.KeyboardEvent, id: ActionId): void {
    if (["Shift", "Control", "Alt", "Meta", "Tab"].includes(event.key)) return;
    event.preventDefault();
    event.stopPropagation();
    if (event.key === "Escape") return setChanging(null);
    const outcome = rebind(keys, id, event.key);
    setProblem(outcome.ok ? "" : outcome.reason);
    if (!outcome.ok) return;
    setKeys(outcome.keys);
    setChanging(null);
  }

  return (
    <Dialog title="How to draw" open={open} onOpenChange={onOpenChange} size="wide">
      <div className="grid gap-x-8 gap-y-6 sm:grid-cols-2">
        <Lines title="With the pointer" lines={POINTER} />
        <Lines title="Keys that stay" lines={FIXED} />
        {KEY_GROUPS.map((group) => (
          <section key={group.title}>
            <h3 className="mb-2 font-semibold">{group.title}</h3>
            <dl className="grid gap-1 text-sm">
              {group.actions.map(({ id, does }) => (
                <div key={id} className="grid grid-cols-[4.5rem_1fr] items-center gap-3">
                  <dt>
                    <button
                      type="button"
                      aria-label={`${does}: key ${keys[id]}. Change it.`}
                      className="min-h-8 min-w-8 text-start"
                      onClick={() => {
                        setProblem("");
                        setChanging(id);
                      }}
                      onKeyDown={(event) => changing === id && take(event, id)}
                      onBlur={() => setChanging(null)}
                    >
                      {changing === id ? (
                        <em className="text-waits">press one</em>
                      ) : (
                        <KeyCap>{keys[id].toUpperCase()}</KeyCap>
                      )}
                    </button>
                  </dt>
                  <dd>{does}</dd>
                </div>
              ))}
            </dl>
          </section>
        ))}
        <section>
          <h3 className="mb-2 font-semibold">Your hand</h3>
          <Checkbox
            label="Key and panel on the left"
            checked={side === "left"}
            onChange={(event) => setSide(event.currentTarget.checked ? "left" : "right")}
          />
          <p className="text-muted mt-3 mb-2 text-sm">
            Choose a key above to change it. Your keys are kept in this browser.
          </p>
          <Button size="small" onClick={() => setKeys(DEFAULT_KEYS)}>
            All keys as they were
          </Button>
        </section>
      </div>
      <p role="status" className="text-disputed mt-3 min-h-5 text-sm">
        {problem}
      </p>
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
