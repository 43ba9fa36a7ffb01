"use client";

import { Toaster as Base } from "sonner";

export { toast } from "sonner";

/** Short messages at the lower edge: what was done, with Undo where that is possible. Mounted once. */
export function Toaster() {
  return (
    <Base
      position="bottom-center"
      containerAriaLabel="Messages"
      duration={6000}
      gap={8}
      style={{ fontFamily: "var(--text)" }}
      toastOptions={{
        unstyled: true,
        classNames: {
          toast:
            "bg-ink text-paper rounded-sheet flex w-[min(26rem,calc(100vw-2rem))] items-center gap-3 px-4 py-3 shadow-lift",
          title: "font-semibold",
          description: "text-paper/85 text-sm",
          content: "grow",
          actionButton: "underline underline-offset-4 font-semibold shrink-0 min-h-6",
          cancelButton: "underline underline-offset-4 shrink-0 min-h-6",
          error: "border-s-4 border-disputed",
          success: "border-s-4 border-agreed",
          warning: "border-s-4 border-waits",
        },
      }}
    />
  );
}
