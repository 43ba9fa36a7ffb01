"use client";

import { useSyncExternalStore } from "react";

export type WhenForm = "date" | "time" | "dateTime" | "relative";

type Props = {
  /** UTC epoch milliseconds, or an ISO 8601 string. */
  at: number | string;
  form?: WhenForm;
  className?: string;
};

const MINUTE_MS = 60_000;
const TICK_MS = 15_000;

/**
 * A moment, stored in UTC and shown in the reader's own zone. The server does not know the zone, so its page says
 * UTC; the browser rewrites it. `relative` is kept current and gives the full moment as its tooltip.
 */
export function When({ at, form = "dateTime", className }: Props) {
  const tickMs = useSyncExternalStore(subscribeToTicks, currentTick, unknownTick);
  const instant = new Date(at);
  if (Number.isNaN(instant.getTime())) return <span className={className}>unknown</span>;
  const isLocal = tickMs !== undefined;
  return (
    <time
      dateTime={instant.toISOString()}
      title={isLocal ? formatInstant(instant, "dateTime", true) : undefined}
      className={className}
    >
      {isLocal && form === "relative"
        ? relativeText(instant.getTime() - tickMs)
        : formatInstant(instant, form === "relative" ? "dateTime" : form, isLocal)}
    </time>
  );
}

function subscribeToTicks(onChange: () => void): () => void {
  const timer = setInterval(onChange, TICK_MS);
  return () => clearInterval(timer);
}

// The time is read in steps, so that a render is repeatable within one and only a new one repaints.
const currentTick = (): number | undefined => Math.floor(Date.now() / TICK_MS) * TICK_MS;
const unknownTick = (): number | undefined => undefined;

const PARTS: Record<Exclude<WhenForm, "relative">, Intl.DateTimeFormatOptions> = {
  date: { day: "numeric", month: "short", year: "numeric" },
  time: { hour: "2-digit", minute: "2-digit" },
  dateTime: { day: "numeric", month: "short", year: "numeric", hour: "2-digit", minute: "2-digit" },
};

function formatInstant(instant: Date, form: Exclude<WhenForm, "relative">, isLocal: boolean): string {
  const zone = isLocal ? {} : { timeZone: "UTC" };
  const text = new Intl.DateTimeFormat("en-GB", { ...PARTS[form], ...zone }).format(instant);
  return isLocal || form === "date" ? text : `${text} UTC`;
}

const UNITS: readonly [Intl.RelativeTimeFormatUnit, number][] = [
  ["year", 365 * 24 * 60],
  ["month", 30 * 24 * 60],
  ["day", 24 * 60],
  ["hour", 60],
  ["minute", 1],
];

/** "in 3 hours", "5 minutes ago"; under a minute either way it is "now". Rounds toward zero: never too far. */
export function relativeText(fromNowMs: number): string {
  const format = new Intl.RelativeTimeFormat("en", { numeric: "auto" });
  const minutes = Math.trunc(fromNowMs / MINUTE_MS);
  for (const [unit, unitMinutes] of UNITS) {
    if (Math.abs(minutes) >= unitMinutes) return format.format(Math.trunc(minutes / unitMinutes), unit);
  }
  return "now";
}
