import type { ReactNode } from "react";
import { cn } from "./cn";

/** What the colours of the field sheet stand for. */
export type MarkState = "agreed" | "waits" | "disputed" | "plain";

const LOOK: Record<MarkState, string> = {
  agreed: "bg-agreed-soft text-agreed-ink",
  waits: "bg-waits-soft text-waits-ink",
  disputed: "bg-disputed-soft text-disputed-ink",
  plain: "bg-sunk text-ink",
};

/** State as a sign, a word and a colour, in that order of importance: each sign has a shape of its own. */
export function StateMark({
  state,
  children,
  className,
}: {
  state: MarkState;
  children: ReactNode;
  className?: string;
}) {
  return (
    <span
      className={cn(
        "inline-flex items-center gap-1.5 rounded-[2px] py-0.5 ps-1.5 pe-2 text-sm font-semibold whitespace-nowrap",
        LOOK[state],
        className,
      )}
    >
      <StateSign state={state} />
      {children}
    </span>
  );
}

/** The sign alone, for places where the word stands elsewhere: stone, half-set stone, split stone, dot. */
export function StateSign({ state, className }: { state: MarkState; className?: string }) {
  return (
    <svg viewBox="0 0 16 16" aria-hidden className={cn("size-3.5 shrink-0", className)}>
      {SIGN[state]}
    </svg>
  );
}

const SIGN: Record<MarkState, ReactNode> = {
  agreed: (
    <>
      <rect x="1.5" y="1.5" width="13" height="13" rx="1.5" fill="currentColor" />
      <path d="M4.5 8.2 7 10.7l4.6-5.2" fill="none" stroke="var(--agreed-soft)" strokeWidth="2" />
    </>
  ),
  waits: (
    <>
      <circle cx="8" cy="8" r="6" fill="none" stroke="currentColor" strokeWidth="2" />
      <path d="M8 2a6 6 0 0 1 0 12z" fill="currentColor" />
    </>
  ),
  disputed: (
    <path
      d="M8 .8 15.2 8 8 15.2.8 8zM9.8 3.6 5.6 8.4l2.6.2-2 3.9 4.4-5-2.7-.3z"
      fill="currentColor"
      fillRule="evenodd"
    />
  ),
  plain: <circle cx="8" cy="8" r="3.5" fill="currentColor" />,
};

const CONSENSUS = {
  settled: { state: "agreed", word: "Settled" },
  short: { state: "waits", word: "Short" },
  split: { state: "disputed", word: "Split" },
} as const;

/** State of an image's consensus in the product's words. */
export function ConsensusMark({ state }: { state: keyof typeof CONSENSUS }) {
  const { state: mark, word } = CONSENSUS[state];
  return <StateMark state={mark}>{word}</StateMark>;
}
