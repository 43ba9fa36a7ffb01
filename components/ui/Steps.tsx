import Link from "next/link";
import { cn } from "./cn";

export type Step = {
  label: string;
  /** Makes a step that was visited reachable again. */
  href?: string | undefined;
  state: "done" | "current" | "ahead";
};

const WORD = { done: "done", current: "you are here", ahead: "ahead" } as const;

/** The steps of one job as survey stations along a line: set stones behind, a station here, pegs ahead. */
export function Steps({
  label,
  steps,
  className,
}: {
  label: string;
  steps: readonly Step[];
  className?: string;
}) {
  return (
    <nav aria-label={label} className={className}>
      <ol className="flex">
        {steps.map((step, index) => (
          <li
            key={step.label}
            className="relative flex flex-1 flex-col items-center gap-2 text-center"
            {...(step.state === "current" ? { "aria-current": "step" as const } : {})}
          >
            {index > 0 ? (
              <span
                aria-hidden
                className={cn(
                  "absolute top-3.5 right-1/2 h-0 w-full -translate-y-1/2 border-t-2",
                  step.state === "ahead" ? "border-rule border-dashed" : "border-agreed",
                )}
              />
            ) : null}
            <Station state={step.state} />
            <span
              className={cn(
                "px-1 text-sm leading-tight",
                step.state === "current" ? "font-semibold" : "text-muted",
              )}
            >
              {step.href && step.state !== "current" ? (
                <Link href={step.href} className="link after:absolute after:inset-0">
                  {step.label}
                </Link>
              ) : (
                step.label
              )}
              <span className="sr-only">, {WORD[step.state]}</span>
            </span>
          </li>
        ))}
      </ol>
    </nav>
  );
}

function Station({ state }: { state: Step["state"] }) {
  return (
    <svg viewBox="0 0 28 28" aria-hidden className="relative z-10 size-7">
      {state === "done" ? (
        <>
          <rect
            x="5"
            y="5"
            width="18"
            height="18"
            rx="2"
            fill="var(--agreed)"
            stroke="var(--paper)"
            strokeWidth="3"
          />
          <path d="m9.5 14.2 3.2 3.2 5.8-6.6" fill="none" stroke="var(--sheet)" strokeWidth="2.2" />
        </>
      ) : null}
      {state === "current" ? (
        <>
          <path
            d="M14 2.5 26 24H2z"
            fill="var(--sheet)"
            stroke="var(--ink)"
            strokeWidth="2.2"
            strokeLinejoin="round"
          />
          <circle cx="14" cy="17" r="2.4" fill="var(--ink)" />
        </>
      ) : null}
      {state === "ahead" ? (
        <circle cx="14" cy="14" r="5" fill="var(--paper)" stroke="var(--rule)" strokeWidth="2" />
      ) : null}
    </svg>
  );
}
