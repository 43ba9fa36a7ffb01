import type { ComponentProps, ReactNode } from "react";
import { cn } from "./cn";

type Props = Omit<ComponentProps<"section">, "title"> & {
  title?: ReactNode;
  /** Controls at the right of the title. */
  actions?: ReactNode;
  lead?: ReactNode;
  level?: 2 | 3;
};

/** A raised sheet with ticked corners: one subject of a page, with its heading. */
export function Sheet({ title, actions, lead, level = 2, className, children, ...rest }: Props) {
  const Heading = level === 2 ? "h2" : "h3";
  return (
    <section {...rest} className={cn("bg-sheet ticks p-5 sm:p-7 forced-colors:border", className)}>
      {title ? (
        <div className="mb-4 flex flex-wrap items-start justify-between gap-x-6 gap-y-3">
          <div>
            <Heading className={cn("font-semibold", level === 2 ? "text-xl" : "text-lg")}>{title}</Heading>
            {lead ? <p className="text-muted mt-1 max-w-prose">{lead}</p> : null}
          </div>
          {actions ? <div className="flex flex-wrap gap-2">{actions}</div> : null}
        </div>
      ) : null}
      {children}
    </section>
  );
}
