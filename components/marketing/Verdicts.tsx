import type { ReactNode } from "react";
import { ConsensusMark } from "@/components/ui/StateMark";
import { blob } from "./blob";
import { closedPath } from "./outlines";

const DASHES = [undefined, "7 3", "2 3", "10 3 2 3"] as const;
const FLOAT = { at: [104, 62], radius: [58, 40] } as const;

const VERDICTS: readonly { state: "settled" | "short" | "split"; text: string; sketch: ReactNode }[] = [
  {
    state: "settled",
    text: "The outlines lie close together. They become one agreed instance that states who supports it and how far they differ.",
    sketch: (
      <>
        <path
          d={closedPath(blob({ ...FLOAT, hand: 0, stray: 0, clicks: 60 }))}
          fill="var(--agreed-soft)"
          stroke="none"
        />
        {[0, 1, 2, 3].map((hand) => (
          <path
            key={hand}
            d={closedPath(blob({ ...FLOAT, hand: hand + 1, stray: 0.035, clicks: 26 - 2 * hand }))}
            strokeDasharray={DASHES[hand]}
          />
        ))}
        <path
          d={closedPath(blob({ ...FLOAT, hand: 0, stray: 0, clicks: 60 }))}
          stroke="var(--agreed)"
          strokeWidth="3.2"
        />
      </>
    ),
  },
  {
    state: "short",
    text: "They could still come together. One more annotator is asked, and only for this image.",
    sketch: (
      <>
        <path d={closedPath(blob({ at: [96, 60], radius: [52, 38], hand: 1, stray: 0.05, clicks: 22 }))} />
        <path
          d={closedPath(blob({ at: [124, 66], radius: [56, 40], hand: 3, stray: 0.06, clicks: 20 }))}
          strokeDasharray="7 3"
        />
        <path
          d={closedPath(blob({ at: [104, 64], radius: [74, 50], hand: 5, stray: 0.02, clicks: 44 }))}
          stroke="var(--waits)"
          strokeWidth="3.4"
          strokeDasharray="0.1 8"
          strokeLinecap="round"
        />
      </>
    ),
  },
  {
    state: "split",
    text: "People see different objects. The image goes to the docket, where an admin keeps, picks or redraws, and writes down why.",
    sketch: (
      <>
        <path d={closedPath(blob({ at: [62, 62], radius: [40, 38], hand: 1, stray: 0.04, clicks: 20 }))} />
        <path d={closedPath(blob({ at: [148, 60], radius: [38, 36], hand: 2, stray: 0.04, clicks: 20 }))} />
        <path
          d={closedPath(blob({ at: [104, 62], radius: [92, 50], hand: 4, stray: 0.02, clicks: 30 }))}
          strokeDasharray="7 3"
        />
        <path d="M106 18v24l-8 8 15 14-8 9v34" stroke="var(--disputed)" strokeWidth="3.2" />
      </>
    ),
  },
];

/** The three ends that an image's consensus can come to, each with a sketch of what the outlines do. */
export function Verdicts() {
  return (
    <ul className="divide-line grid gap-x-10 max-md:divide-y md:grid-cols-3">
      {VERDICTS.map((verdict) => (
        <li key={verdict.state} className="py-6 first:pt-0 md:py-0">
          <svg
            viewBox="0 0 208 124"
            aria-hidden
            className="h-auto w-full max-w-72"
            fill="none"
            stroke="var(--ink)"
            strokeWidth="1.3"
            strokeLinejoin="round"
          >
            {verdict.sketch}
          </svg>
          <p className="mt-3">
            <ConsensusMark state={verdict.state} />
          </p>
          <p className="text-muted mt-2">{verdict.text}</p>
        </li>
      ))}
    </ul>
  );
}
