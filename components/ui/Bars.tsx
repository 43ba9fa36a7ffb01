import type { ReactNode } from "react";
import { cn } from "./cn";
import { StateSign, type MarkState } from "./StateMark";

export type Bar = { label: ReactNode; value: number; text: ReactNode; state?: MarkState };

type Props = {
  /** Names the list for screen readers. */
  label: string;
  bars: readonly Bar[];
  /** The value of a full bar; the greatest one if absent. */
  max?: number;
  className?: string;
};

const FILL: Record<MarkState, string> = {
  agreed: "bg-agreed",
  waits: "bg-waits",
  disputed: "bg-disputed",
  plain: "bg-ink",
};

/** Lengths to compare, each with its figure in words, so that nothing depends on judging the length. */
export function Bars({ label, bars, max, className }: Props) {
  const full = max ?? Math.max(...bars.map((bar) => bar.value), 0);
  return (
    <ul aria-label={label} className={cn("grid gap-2", className)}>
      {bars.map((bar, index) => (
        <li
          key={index}
          className="grid grid-cols-[minmax(6rem,1fr)_2fr_minmax(4rem,auto)] items-center gap-3"
        >
          <span className="flex items-center gap-1.5 text-sm">
            {bar.state ? <StateSign state={bar.state} /> : null}
            {bar.label}
          </span>
          <span aria-hidden className="border-rule h-3 border-s">
            <span
              className={cn("block h-full forced-colors:bg-[CanvasText]", FILL[bar.state ?? "plain"])}
              style={{ width: `${full > 0 ? Math.min(1, Math.max(0, bar.value / full)) * 100 : 0}%` }}
            />
          </span>
          <span className="font-figures text-end text-sm">{bar.text}</span>
        </li>
      ))}
    </ul>
  );
}
