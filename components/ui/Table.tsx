import { ArrowDown, ArrowUp, ArrowUpDown } from "lucide-react";
import Link from "next/link";
import type { ComponentProps, ReactNode } from "react";
import { cn } from "./cn";

type TableProps = {
  /** Says what the table lists; read out first, and shown above unless hidden. */
  caption: ReactNode;
  captionHidden?: boolean;
  /** False keeps rows and columns on a narrow screen and scrolls sideways, for tables that compare. */
  stacked?: boolean;
  children: ReactNode;
  className?: string;
};

/**
 * A ruled table; on a screen under 768 px each row becomes a card whose cells carry their column's name (`label`
 * of Cell). The roles are written out because a changed `display` takes a table's own away in some browsers.
 */
export function Table({ caption, captionHidden = true, stacked = true, children, className }: TableProps) {
  const scrolls = !stacked;
  return (
    <div
      className={cn("relative", scrolls && "overflow-x-auto")}
      {...(scrolls ? { tabIndex: 0, role: "group", "aria-label": "Table, scrolls sideways" } : {})}
    >
      <table
        role="table"
        className={cn("w-full border-collapse text-[0.95rem]", stacked && "stacked", className)}
      >
        <caption className={captionHidden ? "sr-only" : "text-muted mb-2 text-start text-sm"}>
          {caption}
        </caption>
        {children}
      </table>
    </div>
  );
}

export function TableHead({ children }: { children: ReactNode }) {
  return (
    <thead role="rowgroup" className="border-rule border-b">
      <tr role="row">{children}</tr>
    </thead>
  );
}

export function TableBody({ children }: { children: ReactNode }) {
  return (
    <tbody role="rowgroup" className="divide-line divide-y">
      {children}
    </tbody>
  );
}

/** Totals: ruled off above by a double line, as in a hand-kept book. */
export function TableFoot({ children }: { children: ReactNode }) {
  return (
    <tfoot role="rowgroup" className="border-rule border-t-3 border-double font-semibold">
      {children}
    </tfoot>
  );
}

export function Row({ className, ...rest }: ComponentProps<"tr">) {
  return <tr role="row" {...rest} className={cn("hover:bg-ink/3 align-baseline", className)} />;
}

type HeadCellProps = {
  children: ReactNode;
  align?: "start" | "end";
  /** Makes the heading a link that sorts. */
  sort?: { href: string; direction?: "ascending" | "descending" };
  className?: string;
};

const SORT_ICON = { ascending: ArrowUp, descending: ArrowDown, none: ArrowUpDown } as const;

export function HeadCell({ children, align = "start", sort, className }: HeadCellProps) {
  const Icon = SORT_ICON[sort?.direction ?? "none"];
  return (
    <th
      role="columnheader"
      scope="col"
      {...(sort ? { "aria-sort": sort.direction ?? ("none" as const) } : {})}
      className={cn(
        "text-muted px-3 pb-2 text-sm font-semibold first:ps-0 last:pe-0",
        align === "end" ? "text-end" : "text-start",
        className,
      )}
    >
      {sort ? (
        <Link href={sort.href} className="hover:text-ink inline-flex items-center gap-1">
          {children}
          <Icon aria-hidden className="size-3.5" />
        </Link>
      ) : (
        children
      )}
    </th>
  );
}

type CellProps = Omit<ComponentProps<"td">, "align"> & {
  /** The column's name, shown beside the value where rows become cards. */
  label?: string;
  align?: "start" | "end";
  /** Figures are set in the monospaced face and line up by the digit. */
  figure?: boolean;
};

export function Cell({ label, align, figure = false, className, ...rest }: CellProps) {
  const side = align ?? (figure ? "end" : "start");
  return (
    <td
      role="cell"
      {...rest}
      {...(label ? { "data-label": label } : {})}
      className={cn(
        "py-2.5 max-md:px-0 max-md:py-1 md:px-3 md:first:ps-0 md:last:pe-0",
        side === "end" && "md:text-end",
        figure && "font-figures",
        className,
      )}
    />
  );
}

/** The cell that names its row. */
export function RowHead({ className, ...rest }: ComponentProps<"th">) {
  return (
    <th
      role="rowheader"
      scope="row"
      {...rest}
      className={cn("py-2.5 text-start font-semibold max-md:py-1 md:px-3 md:first:ps-0", className)}
    />
  );
}
