import type { ReactNode } from "react";
import { blob } from "./blob";
import { closedPath } from "./outlines";

const STAGES: readonly { name: string; text: string; sketch: ReactNode }[] = [
  {
    name: "Post",
    text: "The requester uploads images, writes the brief and the key, sets quality and pay, sees expected and worst-case cost, and funds the batch.",
    sketch: (
      <>
        <path d="M14 12h30v40H14z" fill="var(--sheet)" />
        <path d="M20 18h30v40H20z" fill="var(--sheet)" />
        <path d="M20 48l9-10 7 7 5-5 9 9" />
        <circle cx="42" cy="27" r="3.5" />
      </>
    ),
  },
  {
    name: "Draw",
    text: "Each image arrives with proposals. Annotators take the ones that hold, correct the rest, draw what is missing and hand in.",
    sketch: (
      <>
        <path d="M14 44c2-16 10-26 22-28 10 2 16 10 16 22" strokeDasharray="3 4" />
        <path d="M14 44l10 10 16-2 12-14" />
        <g fill="var(--sheet)">
          <path d="M11 41h6v6h-6zM21 51h6v6h-6zM37 49h6v6h-6zM49 35h6v6h-6z" />
        </g>
      </>
    ),
  },
  {
    name: "Agree",
    text: "Overlapping outlines are grouped by IoU and merged. Where agreement is low, one more annotator is asked; where it is high, nobody is.",
    sketch: (
      <>
        <path
          d={closedPath(blob({ at: [30, 33], radius: [18, 16], hand: 1, stray: 0.08, clicks: 14 }))}
          strokeDasharray="5 2"
        />
        <path
          d={closedPath(blob({ at: [36, 36], radius: [20, 16], hand: 3, stray: 0.08, clicks: 14 }))}
          strokeDasharray="2 2"
        />
        <path
          d={closedPath(blob({ at: [33, 35], radius: [20, 17], hand: 0, stray: 0, clicks: 40 }))}
          stroke="var(--agreed)"
          strokeWidth="3"
        />
      </>
    ),
  },
  {
    name: "Pay",
    text: "Each annotator is paid for what agrees, with the reason for every score. Either side can dispute it, and an admin decides on the evidence.",
    sketch: (
      <>
        <path d="M12 14h40v40H12zM32 14v40M12 24h40" fill="var(--sheet)" />
        <path d="M17 31h10M17 38h10M17 45h6M37 31h10M41 38h6M37 45h10" />
        <path d="M12 58h40" strokeWidth="1" />
        <path d="M12 61h40" strokeWidth="1" />
      </>
    ),
  },
  {
    name: "Deliver",
    text: "The requester downloads a dataset release in COCO, Pascal VOC and mask files with its quality report and checksums. Unspent money goes back.",
    sketch: (
      <>
        <path d="M32 8l20 10v26L32 56 12 44V18z" fill="var(--sheet)" />
        <path d="M12 18l20 11 20-11M32 29v27" />
        <path d="M22 13.500l20 11v8" stroke="var(--agreed)" strokeWidth="3" />
      </>
    ),
  },
];

/** How a batch goes, as a traverse of five stations: along the page on a wide screen, down it on a narrow one. */
export function Journey() {
  return (
    <ol className="grid gap-0 md:grid-cols-5">
      {STAGES.map((stage, index) => (
        <li
          key={stage.name}
          className="relative grid grid-cols-[4.5rem_1fr] gap-x-4 pb-9 md:block md:pe-6 md:pb-0"
        >
          <span
            aria-hidden
            className={`border-rule absolute max-md:top-16 max-md:bottom-0 max-md:left-9 max-md:border-s md:top-[5.9rem] md:right-0 md:left-0 md:border-t ${index === STAGES.length - 1 ? "max-md:hidden" : ""}`}
          />
          <svg
            viewBox="0 0 64 68"
            aria-hidden
            className="h-18 w-17"
            fill="none"
            stroke="var(--ink)"
            strokeWidth="1.6"
            strokeLinejoin="round"
          >
            {stage.sketch}
          </svg>
          <span
            aria-hidden
            className="bg-paper border-ink relative mt-[1.1rem] hidden size-3.5 border-2 md:block"
          />
          <div className="md:mt-4">
            <h3 className="text-xl font-semibold">
              <span className="text-muted font-figures me-2 text-base font-normal">{index + 1}</span>
              {stage.name}
            </h3>
            <p className="text-muted mt-1.5">{stage.text}</p>
          </div>
        </li>
      ))}
    </ol>
  );
}
