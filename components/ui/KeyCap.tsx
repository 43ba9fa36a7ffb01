import type { ReactNode } from "react";

/** One key of the keyboard, as printed on it. */
export function KeyCap({ children }: { children: ReactNode }) {
  return (
    <kbd className="font-figures border-rule bg-sheet text-ink inline-block min-w-6 rounded-[3px] border border-b-2 px-1.5 text-center text-[0.82em] leading-5">
      {children}
    </kbd>
  );
}
