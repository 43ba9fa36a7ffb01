"use client";

import { Minus, Plus, Scan } from "lucide-react";
import { useId, useMemo, useRef, useState, type PointerEvent, type WheelEvent } from "react";
import { Checkbox } from "@/components/ui/Checkbox";
import { ClassSwatch } from "@/components/ui/ClassSwatch";
import { cn } from "@/components/ui/cn";
import { StateSign, type MarkState } from "@/components/ui/StateMark";
import { svgPathOf } from "@/lib/geometry/svgPath";
import type { Shape } from "@/lib/geometry/types";

export type EvidenceInstance = {
  id: string;
  classId: string;
  shape: Shape;
  /** What is to be said of it: why it was agreed, merged or left out. */
  note?: string;
  mark?: MarkState;
};

export type EvidenceLayer = {
  id: string;
  label: string;
  /** Agreed outlines are drawn full, people's dashed, each with a dash of its own. */
  kind: "agreed" | "person" | "own";
  instances: readonly EvidenceInstance[];
  shownFirst?: boolean;
};

export type EvidenceClass = { id: string; number: number; name: string; colour: string };

type Heat = { width: number; height: number; cellPx: number; values: readonly number[] };

type Props = {
  imageUrl: string;
  imageName: string;
  width: number;
  height: number;
  classes: readonly EvidenceClass[];
  layers: readonly EvidenceLayer[];
  heat?: Heat | null;
};

const DASHES = ["7 4", "2 3", "10 3 2 3", "4 2", "12 5", "1 2", "6 2 1 2", "3 5", "9 2"];
const ZOOM_MAX = 12;

/** One picture with everybody's outlines in layers that can be shown and hidden, and a list in words. */
export function EvidenceView({ imageUrl, imageName, width, height, classes, layers, heat }: Props) {
  const [hidden, setHidden] = useState(
    () => new Set(layers.filter((layer) => layer.shownFirst === false).map((layer) => layer.id)),
  );
  const [showHeat, setShowHeat] = useState(false);
  const [picked, setPicked] = useState<string | null>(null);
  const [view, setView] = useState({ x: 0, y: 0, scale: 1 });
  const drag = useRef<{ x: number; y: number } | null>(null);
  const frame = useRef<HTMLDivElement>(null);
  const byId = useMemo(() => new Map(classes.map((entry) => [entry.id, entry])), [classes]);
  const filterId = useId();
  const visible = layers.filter((layer) => !hidden.has(layer.id));
  const box = `${view.x} ${view.y} ${width / view.scale} ${height / view.scale}`;

  function zoom(factor: number, atX = 0.5, atY = 0.5): void {
    setView((before) => {
      const scale = Math.min(ZOOM_MAX, Math.max(1, before.scale * factor));
      const keepX = before.x + (atX * width) / before.scale;
      const keepY = before.y + (atY * height) / before.scale;
      return clamp(
        { scale, x: keepX - (atX * width) / scale, y: keepY - (atY * height) / scale },
        width,
        height,
      );
    });
  }
  function onWheel(event: WheelEvent<HTMLDivElement>): void {
    if (!event.ctrlKey && !event.metaKey) return;
    const rect = event.currentTarget.getBoundingClientRect();
    zoom(
      event.deltaY < 0 ? 1.2 : 1 / 1.2,
      (event.clientX - rect.left) / rect.width,
      (event.clientY - rect.top) / rect.height,
    );
  }
  function onMove(event: PointerEvent<HTMLDivElement>): void {
    if (!drag.current || view.scale === 1) return;
    const rect = event.currentTarget.getBoundingClientRect();
    const dx = ((event.clientX - drag.current.x) / rect.width) * (width / view.scale);
    const dy = ((event.clientY - drag.current.y) / rect.height) * (height / view.scale);
    drag.current = { x: event.clientX, y: event.clientY };
    setView((before) => clamp({ ...before, x: before.x - dx, y: before.y - dy }, width, height));
  }
  const toggle = (id: string) =>
    setHidden((before) => {
      const next = new Set(before);
      if (!next.delete(id)) next.add(id);
      return next;
    });

  return (
    <div className="grid items-start gap-5 lg:grid-cols-[1fr_20rem]">
      <div className="grid gap-2">
        <div
          ref={frame}
          className={cn(
            "bg-stage relative overflow-hidden",
            view.scale > 1 && "cursor-grab touch-none active:cursor-grabbing",
          )}
          style={{ aspectRatio: `${width} / ${height}` }}
          onWheel={onWheel}
          onPointerDown={(event) => (drag.current = { x: event.clientX, y: event.clientY })}
          onPointerMove={onMove}
          onPointerUp={() => (drag.current = null)}
          onPointerLeave={() => (drag.current = null)}
        >
          <svg
            viewBox={box}
            className="absolute inset-0 size-full"
            role="img"
            aria-label={`${imageName} with ${visible.reduce((sum, layer) => sum + layer.instances.length, 0)} outlines`}
          >
            <image href={imageUrl} width={width} height={height} />
            {showHeat && heat ? <HeatLayer heat={heat} id={filterId} /> : null}
            {visible.map((layer) => (
              <g key={layer.id}>
                {layer.instances.map((instance) => {
                  const key = `${layer.id}/${instance.id}`;
                  return (
                    <Outline
                      key={key}
                      shape={instance.shape}
                      colour={byId.get(instance.classId)?.colour ?? "#888888"}
                      dash={
                        layer.kind === "agreed"
                          ? null
                          : (DASHES[layers.indexOf(layer) % DASHES.length] ?? null)
                      }
                      strong={picked === key}
                      faint={picked !== null && picked !== key}
                      onPick={() => setPicked(picked === key ? null : key)}
                    />
                  );
                })}
              </g>
            ))}
          </svg>
        </div>
        <div className="flex flex-wrap items-center gap-1">
          <ZoomButton
            label="Zoom in"
            onClick={() => zoom(1.5)}
            icon={<Plus aria-hidden className="size-4" />}
          />
          <ZoomButton
            label="Zoom out"
            onClick={() => zoom(1 / 1.5)}
            icon={<Minus aria-hidden className="size-4" />}
          />
          <ZoomButton
            label="Whole picture"
            onClick={() => setView({ x: 0, y: 0, scale: 1 })}
            icon={<Scan aria-hidden className="size-4" />}
          />
          <span className="text-muted font-figures ms-2 text-sm">
            {Math.round(view.scale * 100)} %, {width} × {height} px
          </span>
        </div>
      </div>
      <div className="grid gap-4">
        <fieldset className="grid gap-1">
          <legend className="mb-1 font-semibold">Show</legend>
          {layers.map((layer) => (
            <Checkbox
              key={layer.id}
              label={`${layer.label} (${layer.instances.length})`}
              checked={!hidden.has(layer.id)}
              onChange={() => toggle(layer.id)}
            />
          ))}
          {heat ? (
            <Checkbox
              label="Where they differ (heat map)"
              checked={showHeat}
              onChange={() => setShowHeat(!showHeat)}
            />
          ) : null}
        </fieldset>
        <ul
          className="divide-line max-h-[32rem] divide-y overflow-y-auto"
          aria-label="Outlines in words"
          tabIndex={0}
        >
          {visible.flatMap((layer) =>
            layer.instances
              .filter((instance) => instance.note)
              .map((instance) => {
                const key = `${layer.id}/${instance.id}`;
                const kind = byId.get(instance.classId);
                return (
                  <li key={key}>
                    <button
                      type="button"
                      aria-pressed={picked === key}
                      onClick={() => setPicked(picked === key ? null : key)}
                      className={cn(
                        "hover:bg-ink/5 grid w-full gap-0.5 px-2 py-2 text-start text-sm",
                        picked === key && "bg-ink/8",
                      )}
                    >
                      <span className="flex items-center gap-2 font-semibold">
                        {instance.mark ? <StateSign state={instance.mark} /> : null}
                        <ClassSwatch
                          number={kind?.number ?? 0}
                          colour={kind?.colour}
                          name={kind?.name ?? "unknown class"}
                        />
                      </span>
                      <span className="text-muted">{instance.note}</span>
                    </button>
                  </li>
                );
              }),
          )}
        </ul>
      </div>
    </div>
  );
}

function clamp(view: { x: number; y: number; scale: number }, width: number, height: number) {
  return {
    scale: view.scale,
    x: Math.min(Math.max(0, view.x), width - width / view.scale),
    y: Math.min(Math.max(0, view.y), height - height / view.scale),
  };
}

function ZoomButton({ label, icon, onClick }: { label: string; icon: React.ReactNode; onClick: () => void }) {
  return (
    <button
      type="button"
      aria-label={label}
      onClick={onClick}
      className="border-rule bg-sheet hover:border-ink rounded-sheet grid size-9 place-items-center border"
    >
      {icon}
    </button>
  );
}

type OutlineProps = {
  shape: Shape;
  colour: string;
  dash: string | null;
  strong: boolean;
  faint: boolean;
  onPick: () => void;
};

/** One shape: a dark casing under the class colour, so that it shows on any ground. */
function Outline({ shape, colour, dash, strong, faint, onPick }: OutlineProps) {
  const path = svgPathOf(shape);
  const width = strong ? 4 : 2.2;
  return (
    <g opacity={faint ? 0.25 : 1} onClick={onPick} className="cursor-pointer">
      <path
        d={path}
        fill={colour}
        fillOpacity={strong ? 0.35 : dash ? 0.02 : 0.16}
        fillRule="evenodd"
        stroke="#0b1116"
        strokeOpacity={0.75}
        strokeWidth={width + 2}
        vectorEffect="non-scaling-stroke"
      />
      <path
        d={path}
        fill="none"
        stroke={colour}
        strokeWidth={width}
        {...(dash && { strokeDasharray: dash })}
        vectorEffect="non-scaling-stroke"
      />
    </g>
  );
}

function HeatLayer({ heat, id }: { heat: Heat; id: string }) {
  const most = Math.max(...heat.values, 1e-9);
  return (
    <g aria-hidden id={id}>
      {heat.values.map((value, index) =>
        value / most < 0.05 ? null : (
          <rect
            key={index}
            x={(index % heat.width) * heat.cellPx}
            y={Math.floor(index / heat.width) * heat.cellPx}
            width={heat.cellPx}
            height={heat.cellPx}
            fill="#d55e00"
            fillOpacity={0.75 * (value / most)}
          />
        ),
      )}
    </g>
  );
}
