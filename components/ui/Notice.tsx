import { Info, OctagonAlert, TriangleAlert } from "lucide-react";
import type { ReactNode } from "react";
import { cn } from "./cn";

export type NoticeKind = "info" | "caution" | "danger";

type Props = {
  kind?: NoticeKind;
  title?: ReactNode;
  children?: ReactNode;
  action?: ReactNode;
  /** True for one that appears after the page has loaded: it is read out. */
  live?: boolean;
  className?: string;
};

const LOOK = {
  info: { icon: Info, box: "bg-sunk text-ink shadow-[inset_3px_0_0_var(--rule)]" },
  caution: { icon: TriangleAlert, box: "bg-waits-soft text-waits-ink shadow-[inset_3px_0_0_var(--waits)]" },
  danger: {
    icon: OctagonAlert,
    box: "bg-disputed-soft text-disputed-ink shadow-[inset_3px_0_0_var(--disputed)]",
  },
} as const;

/** Something to know before going on: `info` explains, `caution` may cost, `danger` has gone wrong. */
export function Notice({ kind = "info", title, children, action, live = false, className }: Props) {
  const { icon: Icon, box } = LOOK[kind];
  return (
    <div
      {...(live ? { role: kind === "danger" ? "alert" : "status" } : { role: "note" })}
      className={cn("flex items-start gap-3 px-4 py-3 forced-colors:border", box, className)}
    >
      <Icon aria-hidden className="mt-0.5 size-5 shrink-0" />
      <div className="min-w-0 grow">
        {title ? <p className="font-semibold">{title}</p> : null}
        {children ? <div className="[&_a]:underline [&_a]:underline-offset-2">{children}</div> : null}
        {action ? <div className="mt-2">{action}</div> : null}
      </div>
    </div>
  );
}
