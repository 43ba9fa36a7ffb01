"use client";

import { Tabs as Base } from "@base-ui/react/tabs";
import type { ReactNode } from "react";
import { cn } from "./cn";

export type Tab = { value: string; label: ReactNode; count?: number; panel: ReactNode };

type Props = {
  /** Names the set of tabs for screen readers. */
  label: string;
  tabs: readonly Tab[];
  defaultValue?: string;
  value?: string;
  onValueChange?: (value: string) => void;
  className?: string;
};

/** Panels of which one is seen at a time. For places with an address of their own use LinkTabs. */
export function Tabs({ label, tabs, defaultValue, value, onValueChange, className }: Props) {
  return (
    <Base.Root
      className={className}
      {...(value === undefined ? { defaultValue: defaultValue ?? tabs[0]?.value } : { value })}
      onValueChange={(next: unknown) => onValueChange?.(String(next))}
    >
      <Base.List aria-label={label} className={tabListLook}>
        {tabs.map((tab) => (
          <Base.Tab key={tab.value} value={tab.value} className={tabLook}>
            {tab.label}
            <TabCount count={tab.count} />
          </Base.Tab>
        ))}
      </Base.List>
      {tabs.map((tab) => (
        <Base.Panel key={tab.value} value={tab.value} className="pt-5">
          {tab.panel}
        </Base.Panel>
      ))}
    </Base.Root>
  );
}

export const tabListLook = "border-line flex gap-1 overflow-x-auto border-b overflow-y-hidden";

export const tabLook = cn(
  "text-muted hover:text-ink -mb-px inline-flex min-h-11 shrink-0 items-center gap-2 border-b-[3px] border-transparent px-3 font-semibold",
  "focus-visible:outline-offset-[-3px]",
  "data-active:text-ink data-active:border-ink aria-[current=page]:text-ink aria-[current=page]:border-ink",
);

export function TabCount({ count }: { count: number | undefined }) {
  if (count === undefined) return null;
  return <span className="font-figures text-muted text-sm font-normal">{count.toLocaleString("en")}</span>;
}
