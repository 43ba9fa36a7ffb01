import type { ReactNode } from "react";
import { cn } from "./cn";

/** A plain tag: a fact about a thing, not its state (for states use StateMark). */
export function Badge({
  children,
  icon,
  className,
}: {
  children: ReactNode;
  icon?: ReactNode;
  className?: string;
}) {
  return (
    <span
      className={cn(
        "border-rule text-ink inline-flex items-center gap-1 rounded-[2px] border px-1.5 py-0.5 text-sm leading-tight whitespace-nowrap",
        className,
      )}
    >
      {icon}
      {children}
    </span>
  );
}
