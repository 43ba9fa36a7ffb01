"use client";

import { SunMedium } from "lucide-react";

/** How the picture is shown; 1 is as it is. */
export type Look = { brightness: number; contrast: number; gamma: number };

export const PLAIN_LOOK: Look = { brightness: 1, contrast: 1, gamma: 1 };

const SLIDERS = [
  { name: "brightness", label: "Brightness", min: 40, max: 250 },
  { name: "contrast", label: "Contrast", min: 40, max: 250 },
  { name: "gamma", label: "Gamma", min: 40, max: 250 },
] as const;

/** Sliders for how the picture is shown. They change the view, never the data. */
export function ViewPanel({ look, onChange }: { look: Look; onChange: (look: Look) => void }) {
  return (
    <details className="mt-4 text-sm">
      <summary className="flex min-h-9 cursor-pointer items-center gap-2 font-semibold">
        <SunMedium aria-hidden className="size-4" /> View
      </summary>
      {SLIDERS.map(({ name, label, min, max }) => (
        <label key={name} className="mt-2 grid gap-1">
          <span>
            {label} <span className="font-figures">{Math.round(look[name] * 100)} %</span>
          </span>
          <input
            type="range"
            min={min}
            max={max}
            value={Math.round(look[name] * 100)}
            onChange={(event) => onChange({ ...look, [name]: Number(event.currentTarget.value) / 100 })}
            className="accent-agreed"
          />
        </label>
      ))}
      <button type="button" className="mt-1 min-h-9 underline" onClick={() => onChange(PLAIN_LOOK)}>
        As it is
      </button>
      <p className="text-muted mt-1">Changes what you see, never the data.</p>
    </details>
  );
}
