"use client";

import { memo } from "react";
import { Button } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { KeyCap } from "@/components/ui/KeyCap";
import { TextInput } from "@/components/ui/TextInput";
import type { DeskClass, DeskInstance } from "@/lib/contracts/desk";
import type { DeskController, IntentKind } from "@/lib/desk/controller";
import type { KeyTable } from "@/lib/desk/keys";
import { bounds } from "@/lib/desk/shapes";

type Props = {
  controller: DeskController;
  instance: DeskInstance | undefined;
  kind: DeskClass | undefined;
  intent: IntentKind | null;
  keys: KeyTable;
  outline: { run: () => void; stop: () => void; isRunning: boolean };
};

const ORIGIN = { drawn: "drawn by you", taken: "taken as dealt", adjusted: "taken and adjusted" } as const;

const INTENTS = [
  { kind: "extend", does: "Then draw what is added to it", key: "extend", label: "Add" },
  { kind: "hole", does: "Then draw what is cut out of it", key: "hole", label: "Cut out" },
  { kind: "split", does: "Then drag a line that parts it in two", key: "split", label: "Part" },
  { kind: "join", does: "Then click the shape to join it with", key: "join", label: "Join" },
  {
    kind: "inside",
    does: "Then drag over what belongs to it: it is outlined anew",
    key: "strokeInside",
    label: "Inside",
  },
  {
    kind: "outside",
    does: "Then drag over what does not belong to it: it is outlined anew",
    key: "strokeOutside",
    label: "Outside",
  },
] as const;

/** What is selected: its measures, flags, note, and what can be done with it. */
export const SelectedPanel = memo(function SelectedPanel(props: Props) {
  const { controller, instance, kind, intent, keys, outline } = props;
  if (!instance) return null;
  const [, , width, height] = bounds(instance.shape);
  const vertices =
    instance.shape.kind === "polygon" ? instance.shape.rings.reduce((sum, ring) => sum + ring.length, 0) : 0;
  return (
    <section aria-labelledby="desk-selected" className="border-line mt-4 grid gap-2 border-t pt-3 text-sm">
      <h2 id="desk-selected" className="font-heading text-base font-semibold">
        Selected: {kind?.name}
      </h2>
      <p className="text-muted">
        <span className="font-figures">
          {Math.round(width)} × {Math.round(height)} px
        </span>
        {vertices > 0 ? `, ${vertices} points` : ", a box"}, {ORIGIN[instance.origin]}
      </p>
      {kind?.geometry === "polygon" ? (
        <>
          {outline.isRunning ? (
            <Button size="small" onClick={outline.stop}>
              Outlining ... stop
            </Button>
          ) : (
            <Button size="small" onClick={outline.run}>
              {instance.shape.kind === "box" ? "Outline it" : "Outline anew"}
              <KeyCap>{keys.outline.toUpperCase()}</KeyCap>
            </Button>
          )}
          <div className="grid grid-cols-2 gap-1.5">
            {INTENTS.map((entry) => (
              <Button
                key={entry.kind}
                size="small"
                title={entry.does}
                aria-pressed={intent === entry.kind}
                onClick={() => controller.intend(entry.kind)}
              >
                {entry.label} <KeyCap>{keys[entry.key].toUpperCase()}</KeyCap>
              </Button>
            ))}
          </div>
          <Button size="small" onClick={() => controller.shareBorder()}>
            Share border <KeyCap>{keys.shareBorder.toUpperCase()}</KeyCap>
          </Button>
        </>
      ) : null}
      <Checkbox
        label="Partly hidden"
        checked={instance.occluded}
        onChange={(event) => controller.setFlags({ occluded: event.currentTarget.checked })}
      />
      <Checkbox
        label="Cut by the edge"
        checked={instance.truncated}
        onChange={(event) => controller.setFlags({ truncated: event.currentTarget.checked })}
      />
      <Checkbox
        label="A crowd, not one"
        checked={instance.crowd}
        onChange={(event) => controller.setFlags({ crowd: event.currentTarget.checked })}
      />
      <TextInput
        key={`${instance.id}/${instance.note}`}
        label="Note to the requester"
        optional
        defaultValue={instance.note}
        maxLength={500}
        onBlur={(event) => controller.setNote(instance.id, event.currentTarget.value)}
      />
      <Button size="small" onClick={() => controller.remove(instance.id)}>
        Remove
      </Button>
    </section>
  );
});
