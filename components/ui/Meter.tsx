import { useId, type ReactNode } from "react";
import { cn } from "./cn";
import type { MarkState } from "./StateMark";

type Props = {
  label: ReactNode;
  value: number;
  min?: number;
  max?: number;
  /** A mark on the scale, such as the agreement target. */
  target?: number;
  /** The value in words, for example "0.87" or "412 of 600 images". */
  text: string;
  state?: MarkState;
  className?: string;
};

const FILL: Record<MarkState, string> = {
  agreed: "fill-agreed",
  waits: "fill-waits",
  disputed: "fill-disputed",
  plain: "fill-ink",
};

/** A level on a ruled scale with an optional target; does not end by itself (that is Progress). */
export function Meter({ label, value, min = 0, max = 1, target, text, state = "plain", className }: Props) {
  const id = useId();
  const shareOf = (of: number) => (max > min ? Math.min(1, Math.max(0, (of - min) / (max - min))) : 0);
  return (
    <div className={cn("grid gap-1", className)}>
      <div className="flex items-baseline justify-between gap-4 text-sm">
        <span id={id} className="font-semibold">
          {label}
        </span>
        <span className="font-figures">{text}</span>
      </div>
      <div
        role="meter"
        aria-labelledby={id}
        aria-valuemin={min}
        aria-valuemax={max}
        aria-valuenow={value}
        aria-valuetext={text}
      >
        <svg
          viewBox="0 0 200 14"
          preserveAspectRatio="none"
          aria-hidden
          className="h-3.5 w-full overflow-visible"
        >
          <rect
            x="0"
            y="4"
            width="200"
            height="6"
            className="fill-sunk stroke-rule"
            strokeWidth="1"
            vectorEffect="non-scaling-stroke"
          />
          <rect x="0" y="4" width={200 * shareOf(value)} height="6" className={FILL[state]} />
          {[0.25, 0.5, 0.75].map((at) => (
            <line
              key={at}
              x1={200 * at}
              x2={200 * at}
              y1="10"
              y2="13"
              className="stroke-rule"
              vectorEffect="non-scaling-stroke"
            />
          ))}
          {target === undefined ? null : (
            <line
              x1={200 * shareOf(target)}
              x2={200 * shareOf(target)}
              y1="0"
              y2="14"
              className="stroke-ink"
              strokeWidth="2.5"
              vectorEffect="non-scaling-stroke"
            />
          )}
        </svg>
      </div>
    </div>
  );
}
