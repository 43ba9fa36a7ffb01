"use client";

import { Button } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { TextInput } from "@/components/ui/TextInput";
import type { DeskClass } from "@/lib/contracts/desk";
import type { DeskController, Scene } from "@/lib/desk/controller";
import { bounds } from "@/lib/desk/shapes";

type Props = {
  controller: DeskController;
  scene: Scene;
  classes: readonly DeskClass[];
  onOutline: () => void;
  outlining: boolean;
};

const ORIGIN = { drawn: "drawn by you", taken: "taken as dealt", adjusted: "taken and adjusted" } as const;

/** What is selected: its measures, flags, note, and what can be done with it. */
export function SelectedPanel({ controller, scene, classes, onOutline, outlining }: Props) {
  const instance = scene.document.instances.find((entry) => entry.id === scene.selectedId);
  if (!instance) return null;
  const kind = classes.find((entry) => entry.id === instance.classId);
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
        <Button size="small" pending={outlining} onClick={onOutline}>
          {instance.shape.kind === "box" ? "Outline what is in the box" : "Outline anew"}
        </Button>
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
        key={instance.id}
        label="Note to the requester"
        optional
        defaultValue={instance.note}
        maxLength={500}
        onBlur={(event) =>
          event.currentTarget.value !== instance.note &&
          controller.setFlags({ note: event.currentTarget.value })
        }
      />
      <Button size="small" onClick={() => controller.deleteAt(null)}>
        Remove
      </Button>
    </section>
  );
}
