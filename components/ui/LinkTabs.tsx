import Link from "next/link";
import type { ReactNode } from "react";
import { TabCount, tabListLook, tabLook } from "./Tabs";

export type LinkTab = { href: string; label: ReactNode; count?: number; current?: boolean };

/** Tabs that are pages: each has an address, and the current one says so. */
export function LinkTabs({ label, tabs }: { label: string; tabs: readonly LinkTab[] }) {
  return (
    <nav aria-label={label} className={tabListLook}>
      {tabs.map((tab) => (
        <Link
          key={tab.href}
          href={tab.href}
          className={tabLook}
          {...(tab.current ? { "aria-current": "page" } : {})}
        >
          {tab.label}
          <TabCount count={tab.count} />
        </Link>
      ))}
    </nav>
  );
}
