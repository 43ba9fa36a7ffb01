import type { ReactNode } from "react";
import { cn } from "./cn";

type Props = {
  caption: ReactNode;
  children: ReactNode;
  /** Where the figure comes from or what it is measured over. */
  note?: ReactNode;
  size?: "regular" | "large";
  className?: string;
};

/** One figure with its caption. Put several in a Stats list. */
export function Stat({ caption, children, note, size = "regular", className }: Props) {
  return (
    <div className={cn("border-line flex flex-col border-s ps-4", className)}>
      <dt className="text-muted text-sm">{caption}</dt>
      <dd
        className={cn(
          "font-figures mt-0.5 font-medium tabular-nums",
          size === "large" ? "text-3xl" : "text-xl",
        )}
      >
        {children}
      </dd>
      {note ? <dd className="text-muted mt-0.5 text-sm">{note}</dd> : null}
    </div>
  );
}

/** A row of figures that wraps to two columns on a phone. */
export function Stats({ children, className }: { children: ReactNode; className?: string }) {
  return (
    <dl
      className={cn(
        "grid grid-cols-2 gap-x-4 gap-y-5 sm:grid-cols-[repeat(auto-fit,minmax(9.5rem,1fr))]",
        className,
      )}
    >
      {children}
    </dl>
  );
}

export type Fact = { term: ReactNode; detail: ReactNode };

/** Terms and details, ruled, term left and detail right; a form that has been filled in. */
export function Facts({ facts, className }: { facts: readonly Fact[]; className?: string }) {
  return (
    <dl className={cn("divide-line border-line divide-y border-y", className)}>
      {facts.map((fact, index) => (
        <div key={index} className="grid gap-x-4 py-2 sm:grid-cols-[minmax(8rem,2fr)_3fr]">
          <dt className="text-muted text-[0.95rem]">{fact.term}</dt>
          <dd className="tabular-nums">{fact.detail}</dd>
        </div>
      ))}
    </dl>
  );
}
