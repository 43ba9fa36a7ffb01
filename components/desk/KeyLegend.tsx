"use client";

import { Eye, EyeOff } from "lucide-react";
import { memo } from "react";
import { ClassSwatch } from "@/components/ui/ClassSwatch";
import { cn } from "@/components/ui/cn";
import type { DeskClass, DeskDocument } from "@/lib/contracts/desk";
import type { DeskController } from "@/lib/desk/controller";

type Props = {
  controller: DeskController;
  document: DeskDocument;
  classes: readonly DeskClass[];
  currentClassId: string;
  hiddenClassIds: ReadonlySet<string>;
};

/** The key, as on a map: what each number, colour and pattern stands for, and how many are drawn. */
export const KeyLegend = memo(function KeyLegend(props: Props) {
  const { controller, document, classes, currentClassId, hiddenClassIds } = props;
  return (
    <section aria-labelledby="desk-key">
      <h2 id="desk-key" className="font-heading mb-1 text-base font-semibold">
        Key
      </h2>
      <ul className="flex flex-wrap gap-x-2 md:grid">
        {classes.map((kind) => {
          const count = document.instances.filter((instance) => instance.classId === kind.id).length;
          const isHidden = hiddenClassIds.has(kind.id);
          const isCurrent = currentClassId === kind.id;
          return (
            <li
              key={kind.id}
              className={cn("flex items-center", isCurrent && "bg-ink/8 shadow-[inset_3px_0_0_var(--ink)]")}
            >
              <button
                type="button"
                aria-pressed={isCurrent}
                onClick={() => controller.setClass(kind.id)}
                className="flex min-h-10 min-w-0 grow items-center justify-between gap-2 px-2 text-start text-sm"
              >
                <ClassSwatch number={kind.number} colour={kind.colour} name={kind.name} />
                <span className="text-muted font-figures">
                  {count}
                  <span className="sr-only">
                    {" "}
                    drawn, {kind.geometry === "box" ? "as boxes" : "as outlines"}
                  </span>
                </span>
              </button>
              <button
                type="button"
                aria-label={isHidden ? `Show ${kind.name}` : `Hide ${kind.name}`}
                aria-pressed={isHidden}
                onClick={() => controller.toggleClass(kind.id)}
                className="text-muted hover:text-ink hidden size-9 place-items-center md:grid"
              >
                {isHidden ? (
                  <EyeOff aria-hidden className="size-4" />
                ) : (
                  <Eye aria-hidden className="size-4" />
                )}
              </button>
            </li>
          );
        })}
      </ul>
    </section>
  );
});
