"use client";

import Link, { useLinkStatus } from "next/link";
import { usePathname } from "next/navigation";
import { cn } from "@/components/ui/cn";
import { isPlaceOf, type NavItem } from "./nav";

/** The places of the signed-in person as a list; the current one is marked by a line as well as in words. */
export function NavLinks({ items, direction }: { items: readonly NavItem[]; direction: "row" | "column" }) {
  const pathname = usePathname();
  return (
    <ul className={direction === "row" ? "flex items-stretch gap-1" : "grid"}>
      {items.map((item) => {
        const isHere = !item.external && isPlaceOf(item.href, pathname);
        return (
          <li key={item.href}>
            <Link
              href={item.href}
              {...(isHere ? { "aria-current": "page" as const } : {})}
              {...(item.external ? { target: "_blank", rel: "noopener" } : {})}
              className={cn(
                "text-muted hover:text-ink relative flex items-center font-semibold",
                direction === "row"
                  ? "h-16 border-b-[3px] border-transparent px-3 pt-[3px]"
                  : "min-h-12 border-s-[3px] border-transparent ps-4 text-lg",
                isHere && "text-ink border-agreed",
              )}
            >
              {item.label}
              <OnTheWay />
              {item.external ? <span className="sr-only"> (opens in a new tab)</span> : null}
            </Link>
          </li>
        );
      })}
    </ul>
  );
}

/** A line that runs under a link while its page is being fetched; it waits a moment, so that quick pages show none. */
function OnTheWay() {
  const { pending } = useLinkStatus();
  if (!pending) return null;
  return (
    <span
      role="status"
      className="absolute inset-x-0 -bottom-[3px] block h-[3px] animate-[surface_0.2s_0.15s_both] overflow-hidden"
    >
      <span className="sr-only">Loading</span>
      <span aria-hidden className="bg-agreed block h-full w-2/5 animate-[sweep_1s_ease-in-out_infinite]" />
    </span>
  );
}
