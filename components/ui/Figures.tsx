import { cn } from "./cn";

type PercentProps = { fraction: number; digits?: number; className?: string };

/** A share as a percentage: 0.874 is "87%". Ends are kept honest: only exactly 1 is "100%", only 0 is "0%". */
export function Percent({ fraction, digits = 0, className }: PercentProps) {
  return (
    <data value={fraction} className={cn("font-figures whitespace-nowrap", className)}>
      {formatPercent(fraction, digits)}
    </data>
  );
}

/** See Percent; "under 1%" and "over 99%" stand for what would round to an end without being it. */
export function formatPercent(fraction: number, digits = 0): string {
  if (!Number.isFinite(fraction)) return "not known";
  const step = 10 ** -digits;
  const percent = fraction * 100;
  if (fraction > 0 && percent < step / 2) return `under ${step.toFixed(digits)}%`;
  if (fraction < 1 && percent > 100 - step / 2) return `over ${(100 - step).toFixed(digits)}%`;
  return `${percent.toFixed(digits)}%`;
}

type IntervalProps = {
  /** The estimate itself; left out when only its range is of interest. */
  value?: number | undefined;
  low: number;
  high: number;
  digits?: number;
  /** Coverage of the interval, 0 to 1; named for whoever hears or points at it. */
  level?: number;
  unit?: string;
  className?: string;
};

/** An estimate with the interval it may lie in: "0.87 (0.84 to 0.90)". */
export function Interval({ value, low, high, digits = 2, level = 0.95, unit, className }: IntervalProps) {
  const range = `${low.toFixed(digits)} to ${high.toFixed(digits)}`;
  const suffix = unit ? ` ${unit}` : "";
  return (
    <span className={cn("font-figures", className)} title={`${Math.round(level * 100)}% interval`}>
      {value === undefined ? (
        range + suffix
      ) : (
        <>
          {value.toFixed(digits)}
          {suffix} <span className="text-muted text-[0.75em] whitespace-nowrap">({range})</span>
        </>
      )}
    </span>
  );
}

/** A length of time for reading: 74 s is "1 min 14 s", 5,400 s is "1 h 30 min". Rounds to the smaller unit shown. */
export function formatDuration(durationMs: number): string {
  const seconds = Math.round(durationMs / 1000);
  if (seconds < 60) return `${seconds} s`;
  if (seconds < 3600) return join(Math.floor(seconds / 60), "min", seconds % 60, "s");
  const minutes = Math.round(seconds / 60);
  if (minutes < 1440) return join(Math.floor(minutes / 60), "h", minutes % 60, "min");
  const hours = Math.round(minutes / 60);
  return join(Math.floor(hours / 24), "d", hours % 24, "h");
}

function join(major: number, majorUnit: string, minor: number, minorUnit: string): string {
  return minor === 0 ? `${major} ${majorUnit}` : `${major} ${majorUnit} ${minor} ${minorUnit}`;
}
