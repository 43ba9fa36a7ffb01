import type { CSSProperties, ReactNode } from "react";
import { AGREED_OUTLINE, closedPath, OUTLINES, type SketchPoint } from "./outlines";

const WIDTH = 640;
const HEIGHT = 560;
const FRAME = { left: 40, top: 26, right: 626, bottom: 526 };

/** Where each of the five stands, and which stone of the agreed line it sights. */
const STATIONS: readonly { at: SketchPoint; stone: number }[] = [
  { at: [92, 92], stone: 24 },
  { at: [318, 62], stone: 60 },
  { at: [586, 330], stone: 146 },
  { at: [418, 486], stone: 172 },
  { at: [88, 476], stone: 222 },
];

const STONES = [2, 24, 44, 60, 82, 100, 117, 124, 146, 172, 196, 222] as const;

const LENS = { x: 528, y: 440, radius: 72, focus: [452, 288] as SketchPoint, zoom: 2.3 };

/**
 * Five outlines of one bottle on the wrack line, the sight lines of the five stations, and the line on which they
 * agree. The lens shows the shoulder, where they differ.
 */
export function AgreedLine() {
  return (
    <figure>
      <svg
        viewBox={`0 0 ${WIDTH} ${HEIGHT}`}
        role="img"
        aria-label="Five people's outlines of a bottle on a beach, drawn in different dashes, and one bold line where they agree, marked with stones. A lens shows the shoulder of the bottle, where they differ."
        className="h-auto w-full"
        fill="none"
      >
        <defs>
          <path id="sketch-agreed" d={closedPath(AGREED_OUTLINE)} />
          {OUTLINES.map((outline) => (
            <path
              key={outline.station}
              id={`sketch-outline-${outline.station}`}
              d={closedPath(outline.points)}
            />
          ))}
          <clipPath id="sketch-frame">
            <rect
              x={FRAME.left}
              y={FRAME.top}
              width={FRAME.right - FRAME.left}
              height={FRAME.bottom - FRAME.top}
            />
          </clipPath>
          <clipPath id="sketch-lens">
            <circle cx={LENS.x} cy={LENS.y} r={LENS.radius} />
          </clipPath>
        </defs>
        <rect
          x={FRAME.left}
          y={FRAME.top}
          width={FRAME.right - FRAME.left}
          height={FRAME.bottom - FRAME.top}
          fill="var(--sheet)"
        />
        <g clipPath="url(#sketch-frame)">
          <Ground />
        </g>
        <SightLines />
        <Drawing />
        <Stones />
        <Stations />
        <Lens />
        <Frame />
      </svg>
      <figcaption className="border-line mt-3 border-t pt-3">
        <ul className="font-figures grid grid-cols-3 gap-x-4 gap-y-1.5 text-sm">
          {OUTLINES.map((outline) => (
            <li key={outline.station} className="flex items-center gap-2">
              <svg viewBox="0 0 30 8" aria-hidden className="h-2 w-7.5 shrink-0">
                <path
                  d="M0 4h30"
                  stroke="var(--ink)"
                  strokeWidth="1.6"
                  strokeDasharray={outline.dash === "none" ? undefined : outline.dash}
                />
              </svg>
              <span>
                <span className="sr-only">Outline </span>
                {outline.station}: {outline.iou.toFixed(2)}
              </span>
            </li>
          ))}
          <li className="text-agreed-ink flex items-center gap-2 font-semibold">
            <svg viewBox="0 0 30 8" aria-hidden className="h-2 w-7.5 shrink-0">
              <path d="M0 4h30" stroke="var(--agreed)" strokeWidth="4" />
            </svg>
            agreed
          </li>
        </ul>
        <p className="text-muted mt-2 text-sm">
          The figures are each outline&rsquo;s overlap (IoU) with the agreed line, computed from the five
          outlines drawn here. Number 4 took the neck for sand; the other four outweigh it.
        </p>
      </figcaption>
    </figure>
  );
}

function Drawing() {
  return (
    <g strokeLinejoin="round">
      <use href="#sketch-agreed" fill="var(--agreed-soft)" fillOpacity="0.75" />
      <Bottle />
      {OUTLINES.map((outline, index) => (
        <use
          key={outline.station}
          href={`#sketch-outline-${outline.station}`}
          stroke="var(--ink)"
          strokeOpacity="0.8"
          strokeWidth="1.2"
          strokeDasharray={outline.dash === "none" ? undefined : outline.dash}
          className="animate-[surface_0.7s_ease-out_both]"
          style={delay(0.15 + index * 0.28)}
        />
      ))}
      <path
        d={closedPath(AGREED_OUTLINE)}
        pathLength={1}
        strokeDasharray="1"
        stroke="var(--agreed)"
        strokeWidth="3.6"
        className="animate-[trace_1.5s_ease-in-out_both]"
        style={delay(1.75)}
      />
    </g>
  );
}

/** The little that shows of the bottle itself: a highlight along the glass and the seam of the cap. */
function Bottle() {
  return (
    <g stroke="var(--agreed-ink)" strokeOpacity="0.45" strokeLinecap="round">
      <path d="M202 322 360 236" strokeWidth="5" strokeOpacity="0.16" />
      <path d="M216 336 300 290M312 284 322 278" strokeWidth="1.4" />
      <path d="M236 412c24-12 40-22 62-33" strokeWidth="1" />
      <path d="M478 188l24 44" strokeWidth="1.2" />
    </g>
  );
}

function Stones() {
  return (
    <g fill="var(--sheet)" stroke="var(--agreed-ink)" strokeWidth="1.8">
      {STONES.map((stone) => {
        const [x, y] = AGREED_OUTLINE[stone] ?? [0, 0];
        return <rect key={stone} x={x - 4.5} y={y - 4.5} width="9" height="9" rx="1" />;
      })}
    </g>
  );
}

function SightLines() {
  return (
    <g stroke="var(--rule)" strokeWidth="0.9">
      {STATIONS.map(({ at: [x, y], stone }) => {
        const [toX, toY] = AGREED_OUTLINE[stone] ?? [0, 0];
        return <path key={stone} d={`M${x} ${y}L${toX} ${toY}`} />;
      })}
    </g>
  );
}

function Stations() {
  return (
    <g fontSize="15" fontWeight="600" style={{ fontFamily: "var(--figures)" }}>
      {STATIONS.map(({ at: [x, y] }, index) => (
        <g key={index}>
          <path
            d={`M${x} ${y - 11}L${x + 11} ${y + 8}H${x - 11}Z`}
            fill="var(--sheet)"
            stroke="var(--ink)"
            strokeWidth="1.7"
            strokeLinejoin="round"
          />
          <circle cx={x} cy={y + 1.5} r="2" fill="var(--ink)" />
          <text x={x + 15} y={y + 7} fill="var(--ink)">
            {index + 1}
          </text>
        </g>
      ))}
    </g>
  );
}

function Lens() {
  const { x, y, radius, focus, zoom } = LENS;
  const [focusX, focusY] = focus;
  const reach = radius / zoom;
  return (
    <g>
      <circle cx={focusX} cy={focusY} r={reach} stroke="var(--ink)" strokeWidth="1" />
      <path
        d={`M${focusX + reach * 0.45} ${focusY + reach * 0.9}L${x - radius * 0.45} ${y - radius * 0.9}`}
        stroke="var(--ink)"
        strokeWidth="1"
      />
      <circle cx={x} cy={y} r={radius} fill="var(--sheet)" />
      <g clipPath="url(#sketch-lens)">
        <g transform={`translate(${x} ${y}) scale(${zoom}) translate(${-focusX} ${-focusY})`}>
          <use href="#sketch-agreed" fill="var(--agreed-soft)" />
          {OUTLINES.map((outline) => (
            <use
              key={outline.station}
              href={`#sketch-outline-${outline.station}`}
              stroke="var(--ink)"
              strokeWidth="1.2"
              strokeDasharray={outline.dash === "none" ? undefined : outline.dash}
            />
          ))}
          <use href="#sketch-agreed" stroke="var(--agreed)" strokeWidth="1.7" />
        </g>
      </g>
      <circle cx={x} cy={y} r={radius} stroke="var(--ink)" strokeWidth="1.6" />
    </g>
  );
}

/** Water, weed and pebbles: the wrack line as a surveyor would hatch it. */
function Ground() {
  return (
    <g stroke="var(--rule)" strokeLinecap="round">
      <g strokeWidth="0.9" strokeOpacity="0.75">
        {[0, 1, 2, 3, 4, 5, 6].map((row) => (
          <path
            key={row}
            d={`M${300 + row * 54} 26C${340 + row * 52} ${58 - row * 3} ${430 + row * 40} ${52 - row * 2} ${478 + row * 30} ${92 - row * 9}S${590 + row * 10} ${126 - row * 14} 640 ${148 - row * 20}`}
          />
        ))}
      </g>
      <g strokeWidth="1.2" strokeOpacity="0.65">
        {WEED.map(([x, y, turn, size]) => (
          <g key={`${x} ${y}`} transform={`translate(${x} ${y}) rotate(${turn}) scale(${size})`}>
            <path d="M0 0c8-10 18-8 26-18M6-6c0-8 4-12 8-15M14-12c5 1 9 0 14-3M0 0c-7-4-12-3-18-8M-8-4c-1-6 1-9 4-13" />
          </g>
        ))}
      </g>
      <g strokeWidth="1" strokeOpacity="0.7" fill="var(--sheet)">
        {PEBBLES.map(([x, y, rx, ry]) => (
          <ellipse
            key={`${x} ${y}`}
            cx={x}
            cy={y}
            rx={rx}
            ry={ry}
            transform={`rotate(${(x * 7) % 60} ${x} ${y})`}
          />
        ))}
      </g>
      <g strokeWidth="1.4" strokeOpacity="0.5">
        <path d={SAND.map(([x, y]) => `M${x} ${y}h.01`).join("")} />
      </g>
    </g>
  );
}

const WEED: readonly (readonly [x: number, y: number, turn: number, size: number])[] = [
  [96, 250, -8, 1.3],
  [138, 226, 20, 1],
  [70, 290, 30, 0.9],
  [196, 196, -14, 1.2],
  [238, 150, 12, 1],
  [262, 176, -30, 0.8],
  [330, 448, 8, 1.1],
  [290, 482, -20, 1.2],
  [366, 420, 26, 0.9],
  [232, 500, 6, 1],
  [560, 206, -24, 1.2],
  [596, 178, 14, 1],
  [534, 262, 4, 0.8],
];

const PEBBLES: readonly (readonly [x: number, y: number, rx: number, ry: number])[] = [
  [150, 140, 9, 6],
  [172, 128, 5, 4],
  [66, 196, 7, 5],
  [120, 326, 6, 4],
  [76, 386, 11, 7],
  [96, 404, 5, 4],
  [166, 470, 8, 5],
  [400, 380, 6, 4],
  [428, 400, 10, 6],
  [360, 500, 6, 4],
  [586, 262, 8, 5],
  [380, 122, 7, 5],
  [404, 136, 4, 3],
];

/** Grains of sand, strewn by a fixed rule (steps of the golden ratio), thinner towards the water. */
const SAND: readonly SketchPoint[] = Array.from({ length: 150 }, (_, index): SketchPoint => {
  const across = (index * 0.618034) % 1;
  const down = (index * 0.754878) % 1;
  return [
    Math.round(FRAME.left + across * (FRAME.right - FRAME.left)),
    Math.round(FRAME.top + 90 + Math.sqrt(down) * (FRAME.bottom - FRAME.top - 96)),
  ];
}).filter(([x, y]) => y > 60 + (x - 300) * 0.36);

/** The neat line with ticks in pixels of the picture, x to the right and y down. */
function Frame(): ReactNode {
  const { left, top, right, bottom } = FRAME;
  const columns = [0, 1, 2, 3, 4, 5];
  const rows = [0, 1, 2, 3, 4];
  return (
    <g>
      <rect
        x={left}
        y={top}
        width={right - left}
        height={bottom - top}
        stroke="var(--ink)"
        strokeWidth="1.5"
      />
      <g stroke="var(--ink)" strokeWidth="1">
        {columns.map((column) => (
          <path key={column} d={`M${left + column * 100} ${top}v-6M${left + column * 100} ${bottom}v6`} />
        ))}
        {rows.map((row) => (
          <path key={row} d={`M${left} ${top + row * 100}h-6M${right} ${top + row * 100}h6`} />
        ))}
      </g>
      <g stroke="var(--line)" strokeWidth="1">
        {columns.slice(1).flatMap((column) =>
          rows.slice(1).map((row) => {
            const [x, y] = [left + column * 100, top + row * 100];
            return <path key={`${column} ${row}`} d={`M${x - 5} ${y}h10M${x} ${y - 5}v10`} />;
          }),
        )}
      </g>
      <g fontSize="12" fill="var(--muted)" style={{ fontFamily: "var(--figures)" }}>
        {columns.map((column) => (
          <text key={column} x={left + column * 100} y={bottom + 20} textAnchor="middle">
            {column * 100}
          </text>
        ))}
        {rows.map((row) => (
          <text key={row} x={left - 9} y={top + row * 100 + 4} textAnchor="end">
            {row * 100}
          </text>
        ))}
        <text x={right} y={bottom + 20} textAnchor="end">
          px
        </text>
      </g>
    </g>
  );
}

function delay(seconds: number): CSSProperties {
  return { animationDelay: `${seconds}s` };
}
