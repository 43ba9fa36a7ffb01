import { ArrowLeft, ArrowRight } from "lucide-react";
import type { ReactNode } from "react";
import { ButtonLink } from "./Button";

type Props = {
  label: string;
  /** Addresses of the neighbouring pages; absent at an end. */
  newerHref?: string | undefined;
  olderHref?: string | undefined;
  /** What is on this page, for example "1 to 50 of 214 images". */
  children?: ReactNode;
  words?: { newer: string; older: string };
};

/** Moves through a list that is paged by its last row. */
export function Pagination({ label, newerHref, olderHref, children, words }: Props) {
  if (!newerHref && !olderHref) return null;
  return (
    <nav aria-label={label} className="mt-6 flex flex-wrap items-center justify-between gap-3">
      <span className="text-muted text-sm">{children}</span>
      <span className="flex gap-2">
        {newerHref ? (
          <ButtonLink href={newerHref} size="small" icon={<ArrowLeft aria-hidden className="size-4" />}>
            {words?.newer ?? "Newer"}
          </ButtonLink>
        ) : null}
        {olderHref ? (
          <ButtonLink href={olderHref} size="small">
            {words?.older ?? "Older"}
            <ArrowRight aria-hidden className="size-4" />
          </ButtonLink>
        ) : null}
      </span>
    </nav>
  );
}
