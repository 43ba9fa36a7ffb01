"use client";

import Link from "next/link";
import { useState } from "react";
import { Button } from "@/components/ui/Button";
import { StateMark } from "@/components/ui/StateMark";

type Tile = {
  id: string;
  fileName: string;
  consensusState: "none" | "settled" | "short" | "split" | "void";
  submitted: number;
  slotsWanted: number;
  agreement: number | null;
};

const FILTERS = [
  { value: "all", label: "All" },
  { value: "settled", label: "Settled" },
  { value: "short", label: "Short" },
  { value: "split", label: "Split" },
  { value: "none", label: "To draw" },
  { value: "void", label: "Set aside" },
] as const;

const PAGE = 48;

/** The pictures of a batch with their state; filtered here, because the list is in the page already. */
export function ImageGrid({ batchId, images }: { batchId: string; images: Tile[] }) {
  const [filter, setFilter] = useState<(typeof FILTERS)[number]["value"]>("all");
  const [shown, setShown] = useState(PAGE);
  const matching = images.filter((image) => filter === "all" || image.consensusState === filter);
  return (
    <>
      <div className="mb-4 flex flex-wrap gap-2" role="group" aria-label="Show">
        {FILTERS.map(({ value, label }) => {
          const count =
            value === "all" ? images.length : images.filter((image) => image.consensusState === value).length;
          return (
            <Button
              key={value}
              size="small"
              kind={filter === value ? "primary" : "quiet"}
              aria-pressed={filter === value}
              onClick={() => setFilter(value)}
            >
              {label} <span className="font-figures">{count}</span>
            </Button>
          );
        })}
      </div>
      {matching.length === 0 ? <p className="text-muted">No picture is in this state.</p> : null}
      <ul className="grid grid-cols-2 gap-x-4 gap-y-6 sm:grid-cols-3 lg:grid-cols-4">
        {matching.slice(0, shown).map((image) => (
          <li key={image.id}>
            <Link href={`/batches/${batchId}/images/${image.id}`} className="group grid gap-1.5">
              <img
                src={`/api/images/${image.id}/thumb`}
                alt=""
                loading="lazy"
                className="bg-sunk group-hover:outline-ink aspect-4/3 w-full object-cover group-hover:outline-2"
              />
              <span className="truncate text-sm font-semibold group-hover:underline">{image.fileName}</span>
              <span className="flex flex-wrap items-center gap-2 text-sm">
                <ImageMark state={image.consensusState} />
                <span className="text-muted font-figures">
                  {image.submitted}/{image.slotsWanted}
                  {image.agreement === null ? "" : ` · ${Math.round(image.agreement * 100)} %`}
                </span>
              </span>
            </Link>
          </li>
        ))}
      </ul>
      {matching.length > shown ? (
        <Button className="mt-6" onClick={() => setShown(shown + PAGE)}>
          Show {Math.min(PAGE, matching.length - shown)} more
        </Button>
      ) : null}
    </>
  );
}

export function ImageMark({ state }: { state: Tile["consensusState"] }) {
  if (state === "settled") return <StateMark state="agreed">settled</StateMark>;
  if (state === "short") return <StateMark state="waits">short</StateMark>;
  if (state === "split") return <StateMark state="disputed">split</StateMark>;
  if (state === "void") return <StateMark state="plain">set aside</StateMark>;
  return <StateMark state="plain">to draw</StateMark>;
}
