"use client";

import { Tooltip as Base } from "@base-ui/react/tooltip";
import type { ReactElement, ReactNode } from "react";

type Props = {
  text: ReactNode;
  /** A focusable element with a name of its own: the tooltip adds to it and never replaces it. */
  children: ReactElement<Record<string, unknown>>;
  side?: "top" | "bottom" | "left" | "right";
};

/** A word of explanation on hover and focus. Nothing that is needed to go on may be only here. */
export function Tooltip({ text, children, side = "top" }: Props) {
  return (
    <Base.Root>
      <Base.Trigger render={children} />
      <Base.Portal>
        <Base.Positioner side={side} sideOffset={6} className="z-50">
          <Base.Popup className="bg-ink text-paper rounded-sheet max-w-72 px-2.5 py-1.5 text-sm">
            {text}
          </Base.Popup>
        </Base.Positioner>
      </Base.Portal>
    </Base.Root>
  );
}
