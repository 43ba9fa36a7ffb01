"use client";

import { Dialog as Base } from "@base-ui/react/dialog";
import { X } from "lucide-react";
import type { ReactElement, ReactNode } from "react";
import { cn } from "./cn";

type Props = {
  title: ReactNode;
  description?: ReactNode;
  children?: ReactNode;
  /** Buttons at the foot, the main one last. */
  actions?: ReactNode;
  /** A button that opens it; leave out when `open` is controlled from elsewhere. */
  trigger?: ReactElement<Record<string, unknown>>;
  open?: boolean;
  onOpenChange?: (open: boolean) => void;
  size?: "regular" | "wide";
};

/** A modal sheet. Escape and the close button close it, focus is kept inside and returned afterwards. */
export function Dialog({ title, description, children, actions, trigger, open, onOpenChange, size }: Props) {
  return (
    <Base.Root
      {...(open === undefined ? {} : { open })}
      {...(onOpenChange ? { onOpenChange: (next: boolean) => onOpenChange(next) } : {})}
    >
      {trigger ? <Base.Trigger render={trigger} /> : null}
      <Base.Portal>
        <Base.Backdrop className={backdropLook} />
        <Base.Popup className={cn(popupLook, size === "wide" ? "sm:max-w-3xl" : "sm:max-w-lg")}>
          <div className="flex items-start justify-between gap-4">
            <Base.Title className="font-heading text-xl font-semibold">{title}</Base.Title>
            <Base.Close
              aria-label="Close"
              className="rounded-sheet hover:bg-ink/8 -me-2 -mt-1 grid size-9 shrink-0 place-items-center"
            >
              <X aria-hidden className="size-5" />
            </Base.Close>
          </div>
          {description ? (
            <Base.Description className="text-muted mt-1.5">{description}</Base.Description>
          ) : null}
          {children ? <div className="mt-4">{children}</div> : null}
          {actions ? (
            <div className="mt-6 flex flex-col-reverse gap-2 sm:flex-row sm:justify-end">{actions}</div>
          ) : null}
        </Base.Popup>
      </Base.Portal>
    </Base.Root>
  );
}

/** Closes the dialog around it; give it a button to render. */
export function DialogClose({ render }: { render: ReactElement<Record<string, unknown>> }) {
  return <Base.Close render={render} />;
}

export const backdropLook =
  "fixed inset-0 z-40 bg-[#0b1013]/55 transition-opacity duration-150 data-ending-style:opacity-0 data-starting-style:opacity-0";

export const popupLook = cn(
  "fixed z-50 bg-sheet text-ink border-rule shadow-lift border overflow-y-auto p-5 sm:p-6",
  "inset-x-0 bottom-0 max-h-[92dvh] w-full rounded-t-lg",
  "sm:inset-x-auto sm:bottom-auto sm:top-1/2 sm:left-1/2 sm:max-h-[86dvh] sm:-translate-x-1/2 sm:-translate-y-1/2 sm:rounded-sheet",
  "transition-opacity duration-150 data-ending-style:opacity-0 data-starting-style:opacity-0",
);
