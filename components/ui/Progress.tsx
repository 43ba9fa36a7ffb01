import { useId, type ReactNode } from "react";
import { cn } from "./cn";
import type { MarkState } from "./StateMark";

type Props = {
  label: ReactNode;
  /** Done share, 0 to 1; null while it is not known how much there is. */
  value: number | null;
  /** What is being done, or "38 of 120 images"; replaces the percentage. */
  detail?: ReactNode;
  state?: MarkState;
  labelHidden?: boolean;
  className?: string;
};

const BAR: Record<MarkState, string> = {
  agreed: "bg-agreed forced-colors:bg-[Highlight]",
  waits: "bg-waits forced-colors:bg-[Highlight]",
  disputed: "bg-disputed forced-colors:bg-[Highlight]",
  plain: "bg-ink forced-colors:bg-[Highlight]",
};

/** How far something has come that ends by itself. */
export function Progress({ label, value, detail, state = "agreed", labelHidden = false, className }: Props) {
  const id = useId();
  const share = value === null ? null : Math.min(1, Math.max(0, value));
  const percent = share === null ? undefined : Math.floor(share * 100);
  return (
    <div className={cn("grid gap-1", className)}>
      <div className="flex items-baseline justify-between gap-4 text-sm">
        <span id={id} className={labelHidden ? "sr-only" : "font-semibold"}>
          {label}
        </span>
        <span className="text-muted font-figures">
          {detail ?? (percent === undefined ? null : `${percent}%`)}
        </span>
      </div>
      <div
        role="progressbar"
        aria-labelledby={id}
        aria-valuemin={0}
        aria-valuemax={100}
        aria-valuenow={percent}
        className="bg-sunk border-rule relative h-2.5 overflow-hidden rounded-[1px] border"
      >
        {share === null ? (
          <span
            className={cn(
              "absolute inset-y-0 left-0 w-2/5 animate-[sweep_1.4s_ease-in-out_infinite]",
              BAR[state],
            )}
          />
        ) : (
          <span
            className={cn("absolute inset-y-0 left-0 transition-[width] duration-300", BAR[state])}
            style={{ width: `${share * 100}%` }}
          />
        )}
      </div>
    </div>
  );
}
