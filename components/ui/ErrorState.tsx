import type { ReactNode } from "react";
import { cn } from "./cn";

type Props = {
  title: ReactNode;
  /** What still holds and what to try. */
  children?: ReactNode;
  action?: ReactNode;
  /** A number to quote to the people who run the market. */
  reference?: string | undefined;
  className?: string;
};

/** In place of what could not be shown. */
export function ErrorState({ title, children, action, reference, className }: Props) {
  return (
    <div
      role="alert"
      className={cn("bg-sheet px-5 py-6 shadow-[inset_3px_0_0_var(--disputed)] sm:px-7", className)}
    >
      <p className="font-heading text-lg font-semibold">{title}</p>
      {children ? <div className="text-muted mt-1.5 max-w-prose">{children}</div> : null}
      {action ? <div className="mt-4 flex flex-wrap gap-2">{action}</div> : null}
      {reference ? (
        <p className="text-muted mt-4 text-sm">
          Reference <span className="font-figures">{reference}</span>
        </p>
      ) : null}
    </div>
  );
}
