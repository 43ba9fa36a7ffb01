import { cn } from "./cn";

type Props = {
  /** In order of time; a gap is null. */
  values: readonly (number | null)[];
  /** What the line shows and how it went, in words: it is the picture's text alternative. */
  label: string;
  min?: number;
  max?: number;
  className?: string;
};

const WIDTH = 120;
const HEIGHT = 28;
const INSET = 3;

/** A line the size of a word. The last point is marked. */
export function Sparkline({ values, label, min, max, className }: Props) {
  const known = values.filter((value) => value !== null);
  if (known.length === 0) return <span className="text-muted text-sm">nothing measured yet</span>;
  const low = min ?? Math.min(...known);
  const high = max ?? Math.max(...known);
  const points = values.map((value, index) =>
    value === null
      ? null
      : {
          x: values.length === 1 ? WIDTH / 2 : INSET + (index / (values.length - 1)) * (WIDTH - 2 * INSET),
          y:
            high === low
              ? HEIGHT / 2
              : HEIGHT - INSET - ((value - low) / (high - low)) * (HEIGHT - 2 * INSET),
        },
  );
  const last = points.findLast((point) => point !== null);
  return (
    <svg
      viewBox={`0 0 ${WIDTH} ${HEIGHT}`}
      role="img"
      aria-label={label}
      className={cn("h-7 w-30 overflow-visible", className)}
    >
      <path
        d={pathThrough(points)}
        fill="none"
        stroke="var(--ink)"
        strokeWidth="1.6"
        strokeLinejoin="round"
      />
      {last ? <rect x={last.x - 2.5} y={last.y - 2.5} width="5" height="5" fill="var(--agreed)" /> : null}
    </svg>
  );
}

/** A path of straight pieces; a null lifts the pen. */
export function pathThrough(points: readonly ({ x: number; y: number } | null)[]): string {
  let pen = "M";
  let path = "";
  for (const point of points) {
    if (!point) {
      pen = "M";
      continue;
    }
    path += `${pen}${round(point.x)} ${round(point.y)}`;
    pen = "L";
  }
  return path;
}

const round = (value: number) => Math.round(value * 100) / 100;
