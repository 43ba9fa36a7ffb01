import Link from "next/link";
import type { ReactNode } from "react";

type Props = {
  title: ReactNode;
  lead?: ReactNode;
  /** The way back up, outermost first. */
  crumbs?: readonly { href: string; label: string }[];
  /** State marks beside the title. */
  marks?: ReactNode;
  actions?: ReactNode;
};

/** The head of a page: where it is, what it is, and what can be done with all of it. */
export function PageHeader({ title, lead, crumbs, marks, actions }: Props) {
  return (
    <header className="mb-8 flex flex-wrap items-end justify-between gap-x-8 gap-y-4">
      <div className="min-w-0">
        {crumbs?.length ? (
          <nav aria-label="You are in" className="text-muted mb-2 text-sm">
            <ol className="flex flex-wrap gap-x-2">
              {crumbs.map((crumb) => (
                <li key={crumb.href} className="flex gap-x-2">
                  <Link href={crumb.href} className="link">
                    {crumb.label}
                  </Link>
                  <span aria-hidden>/</span>
                </li>
              ))}
            </ol>
          </nav>
        ) : null}
        <div className="flex flex-wrap items-center gap-x-4 gap-y-2">
          <h1 className="text-3xl font-semibold wrap-anywhere sm:text-4xl">{title}</h1>
          {marks}
        </div>
        {lead ? <p className="text-muted mt-2 max-w-prose text-lg">{lead}</p> : null}
      </div>
      {actions ? <div className="flex flex-wrap gap-2">{actions}</div> : null}
    </header>
  );
}
