import type { ReactNode } from "react";
import { cn } from "./cn";

type Props = { title: ReactNode; children?: ReactNode; action?: ReactNode; className?: string };

/** Where a list has nothing yet: says what will be here and offers the step that puts it there. */
export function EmptyState({ title, children, action, className }: Props) {
  return (
    <div className={cn("border-rule rounded-sheet border border-dashed px-5 py-10 text-center", className)}>
      <svg
        viewBox="0 0 120 48"
        aria-hidden
        className="text-muted mx-auto mb-4 h-12 w-30"
        fill="none"
        stroke="currentColor"
      >
        <path d="M4 40c16-10 22 2 36-4s18-14 32-12 20 10 44 2" strokeDasharray="3 5" />
        <path d="M52 36V17l8-9 8 9v19z" fill="var(--paper)" />
        <path d="M46 36h28" />
        <circle cx="60" cy="21" r="1.6" fill="currentColor" />
      </svg>
      <p className="font-heading text-lg font-semibold">{title}</p>
      {children ? <div className="text-muted mx-auto mt-1.5 max-w-md">{children}</div> : null}
      {action ? <div className="mt-5 flex flex-wrap justify-center gap-2">{action}</div> : null}
    </div>
  );
}
