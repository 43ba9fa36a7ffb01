"use client";

import Link from "next/link";
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
                "text-muted hover:text-ink flex items-center font-semibold",
                direction === "row"
                  ? "h-16 border-b-[3px] border-transparent px-3 pt-[3px]"
                  : "min-h-12 border-s-[3px] border-transparent ps-4 text-lg",
                isHere && "text-ink border-agreed",
              )}
            >
              {item.label}
              {item.external ? <span className="sr-only"> (opens in a new tab)</span> : null}
            </Link>
          </li>
        );
      })}
    </ul>
  );
}
