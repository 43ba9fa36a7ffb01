import { useId, type ReactNode } from "react";
import { pathThrough } from "./Sparkline";

export type ChartSeries = {
  name: string;
  points: readonly { x: number; y: number }[];
  /** A band around the line, for intervals; as long as `points`. */
  band?: readonly { low: number; high: number }[];
};

type Props = {
  title: ReactNode;
  series: readonly ChartSeries[];
  xLabel: string;
  yLabel: string;
  formatX?: (x: number) => string;
  formatY?: (y: number) => string;
  yRange?: readonly [low: number, high: number];
  /** A level to reach, drawn as a dashed line and named. */
  target?: { y: number; label: string };
};

const WIDTH = 640;
const HEIGHT = 260;
const LEFT = 60;
const RIGHT = 12;
const TOP = 12;
const BOTTOM = 40;
const STROKES = ["var(--ink)", "var(--agreed)", "var(--waits)", "var(--disputed)"] as const;
const DASHES = ["", "7 3", "2 3", "9 3 2 3"] as const;

/** Lines over a common axis. Series differ by dash as well as colour, and a table gives the same figures. */
export function LineChart({ title, series, xLabel, yLabel, formatX, formatY, yRange, target }: Props) {
  const titleId = useId();
  const all = series.flatMap((line) => line.points);
  if (all.length === 0) return <p className="text-muted">{title}: nothing measured yet.</p>;
  const showX = formatX ?? String;
  const showY = formatY ?? ((y: number) => String(Math.round(y * 1000) / 1000));
  const [xLow, xHigh] = rangeOf(all.map((point) => point.x));
  const [yLow, yHigh] = yRange ?? rangeOf([...all.map((point) => point.y), ...(target ? [target.y] : [])]);
  const toX = (x: number) => LEFT + ((x - xLow) / (xHigh - xLow)) * (WIDTH - LEFT - RIGHT);
  const toY = (y: number) => HEIGHT - BOTTOM - ((y - yLow) / (yHigh - yLow)) * (HEIGHT - TOP - BOTTOM);
  const levels = [0, 0.25, 0.5, 0.75, 1].map((share) => yLow + share * (yHigh - yLow));
  return (
    <figure className="grid gap-2">
      <figcaption id={titleId} className="flex flex-wrap items-baseline justify-between gap-x-6 gap-y-1">
        <span className="font-semibold">{title}</span>
        {series.length > 1 ? (
          <span className="flex flex-wrap gap-x-4 text-sm">
            {series.map((line, index) => (
              <span key={line.name} className="inline-flex items-center gap-1.5">
                <svg viewBox="0 0 28 6" aria-hidden className="h-1.5 w-7">
                  <path
                    d="M0 3h28"
                    stroke={STROKES[index % 4]}
                    strokeDasharray={DASHES[index % 4]}
                    strokeWidth="2"
                  />
                </svg>
                {line.name}
              </span>
            ))}
          </span>
        ) : null}
      </figcaption>
      <svg
        viewBox={`0 0 ${WIDTH} ${HEIGHT}`}
        role="img"
        aria-labelledby={titleId}
        className="font-figures h-auto w-full"
      >
        {levels.map((level) => (
          <g key={level}>
            <line x1={LEFT} x2={WIDTH - RIGHT} y1={toY(level)} y2={toY(level)} stroke="var(--line)" />
            <text x={LEFT - 8} y={toY(level) + 4} textAnchor="end" fontSize="14" fill="var(--muted)">
              {showY(level)}
            </text>
          </g>
        ))}
        {[xLow, (xLow + xHigh) / 2, xHigh].map((x, index) => (
          <text
            key={x}
            x={toX(x)}
            y={HEIGHT - BOTTOM + 17}
            textAnchor={(["start", "middle", "end"] as const)[index]}
            fontSize="14"
            fill="var(--muted)"
          >
            {showX(x)}
          </text>
        ))}
        <text x={WIDTH - RIGHT} y={HEIGHT - 5} textAnchor="end" fontSize="14" fill="var(--muted)">
          {xLabel}
        </text>
        {target ? (
          <g>
            <line
              x1={LEFT}
              x2={WIDTH - RIGHT}
              y1={toY(target.y)}
              y2={toY(target.y)}
              stroke="var(--ink)"
              strokeDasharray="4 4"
            />
            <text x={WIDTH - RIGHT} y={toY(target.y) - 5} textAnchor="end" fontSize="14" fill="var(--ink)">
              {target.label}
            </text>
          </g>
        ) : null}
        {series.map((line, index) => (
          <g key={line.name}>
            {line.band ? (
              <path d={bandPath(line, toX, toY)} fill={STROKES[index % 4]} fillOpacity="0.14" />
            ) : null}
            <path
              d={pathThrough(line.points.map((point) => ({ x: toX(point.x), y: toY(point.y) })))}
              fill="none"
              stroke={STROKES[index % 4]}
              strokeDasharray={DASHES[index % 4]}
              strokeWidth="2"
              strokeLinejoin="round"
            />
          </g>
        ))}
      </svg>
      <details className="text-sm">
        <summary className="text-muted">Figures</summary>
        <div
          className="mt-2 max-h-64 overflow-auto"
          tabIndex={0}
          role="group"
          aria-label="Figures of the chart"
        >
          <table className="font-figures w-full max-w-md border-collapse text-end">
            <thead>
              <tr className="border-rule border-b">
                <th scope="col" className="py-1 text-start">
                  {xLabel}
                </th>
                {series.map((line) => (
                  <th scope="col" key={line.name} className="py-1 ps-4">
                    {series.length > 1 ? line.name : yLabel}
                  </th>
                ))}
              </tr>
            </thead>
            <tbody>
              {[...new Set(all.map((point) => point.x))]
                .sort((a, b) => a - b)
                .map((x) => (
                  <tr key={x} className="border-line border-b">
                    <td className="py-0.5 text-start">{showX(x)}</td>
                    {series.map((line) => {
                      const point = line.points.find((candidate) => candidate.x === x);
                      return (
                        <td key={line.name} className="py-0.5 ps-4">
                          {point ? showY(point.y) : "–"}
                        </td>
                      );
                    })}
                  </tr>
                ))}
            </tbody>
          </table>
        </div>
      </details>
    </figure>
  );
}

function bandPath(line: ChartSeries, toX: (x: number) => number, toY: (y: number) => number): string {
  const xs = line.points.map((point) => toX(point.x));
  const upper = (line.band ?? []).map((edge, index) => ({ x: xs[index] ?? 0, y: toY(edge.high) }));
  const lower = (line.band ?? []).map((edge, index) => ({ x: xs[index] ?? 0, y: toY(edge.low) })).reverse();
  return `${pathThrough([...upper, ...lower])}Z`;
}

/** Least and greatest, opened by one where they coincide so that a scale exists. */
function rangeOf(values: readonly number[]): [number, number] {
  const low = Math.min(...values);
  const high = Math.max(...values);
  return low === high ? [low - 0.5, high + 0.5] : [low, high];
}
