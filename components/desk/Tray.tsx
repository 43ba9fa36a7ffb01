"use client";

import { memo, useEffect, useRef } from "react";
import { Button } from "@/components/ui/Button";
import { cn } from "@/components/ui/cn";
import { KeyCap } from "@/components/ui/KeyCap";
import type { DeskProposal, DeskTask } from "@/lib/contracts/desk";
import type { DeskController } from "@/lib/desk/controller";
import type { KeyTable } from "@/lib/desk/keys";
import { bounds } from "@/lib/desk/shapes";
import { svgPathOf } from "@/lib/geometry/svgPath";

type Props = {
  controller: DeskController;
  dealt: readonly DeskProposal[];
  dealtIndex: number;
  task: DeskTask;
  keys: KeyTable;
};

const CARD_PX = 64;

/** The strip of dealt proposals at the foot of the sheet: look at one, take it, adjust it, or send it away. */
export const Tray = memo(function Tray({ controller, dealt, dealtIndex, task, keys }: Props) {
  const current = useRef<HTMLButtonElement>(null);
  useEffect(() => {
    current.current?.scrollIntoView({ block: "nearest", inline: "nearest" });
  }, [dealtIndex, dealt]);
  return (
    <section
      aria-label="Tray of proposals"
      className="border-line flex flex-wrap items-center gap-x-3 gap-y-1 border-t px-3 py-1.5 sm:flex-nowrap"
    >
      {dealt.length === 0 ? (
        <p className="text-muted py-2 text-sm">
          {task.proposals.length === 0
            ? "No proposal is worth your time here: draw what you see."
            : "The tray is empty. Draw what is missing."}
        </p>
      ) : (
        <>
          <ol
            className="flex min-w-0 grow basis-full gap-1.5 overflow-x-auto py-0.5 sm:basis-0"
            aria-label={`${dealt.length} proposals, the most useful first`}
          >
            {dealt.map((proposal, index) => (
              <li key={proposal.id}>
                <button
                  ref={index === dealtIndex ? current : null}
                  type="button"
                  aria-label={`Proposal ${index + 1} of ${dealt.length}, ${Math.round(proposal.score * 100)} percent likely`}
                  aria-current={index === dealtIndex}
                  onClick={() => controller.showDealt(index)}
                  className={cn(
                    "bg-stage relative block overflow-hidden border-2",
                    index === dealtIndex ? "border-waits" : "border-transparent opacity-80 hover:opacity-100",
                  )}
                  style={{ width: CARD_PX, height: CARD_PX }}
                >
                  <Cutting proposal={proposal} task={task} />
                </button>
              </li>
            ))}
          </ol>
          <div className="flex w-full shrink-0 gap-1.5 max-sm:*:grow sm:w-auto">
            <Button size="small" onClick={() => controller.take(false)}>
              Take{" "}
              <span className="max-sm:hidden">
                <KeyCap>{keys.take.toUpperCase()}</KeyCap>
              </span>
            </Button>
            <Button size="small" onClick={() => controller.take(true)}>
              Adjust{" "}
              <span className="max-sm:hidden">
                <KeyCap>{keys.takeAndAdjust.toUpperCase()}</KeyCap>
              </span>
            </Button>
            <Button size="small" onClick={() => controller.sendAway()}>
              Not one{" "}
              <span className="max-sm:hidden">
                <KeyCap>{keys.sendAway.toUpperCase()}</KeyCap>
              </span>
            </Button>
          </div>
        </>
      )}
    </section>
  );
});

/** The part of the picture that a proposal is about, with its outline. */
const Cutting = memo(function Cutting({ proposal, task }: { proposal: DeskProposal; task: DeskTask }) {
  const [x, y, width, height] = bounds(proposal.shape);
  const side = Math.max(width, height) * 1.3;
  const left = x + width / 2 - side / 2;
  const top = y + height / 2 - side / 2;
  const path = svgPathOf(proposal.shape);
  return (
    <svg
      aria-hidden
      viewBox={`${left} ${top} ${side} ${side}`}
      className="size-full"
      preserveAspectRatio="xMidYMid slice"
    >
      <image href={task.imageUrl} width={task.width} height={task.height} />
      <path d={path} fill="none" stroke="#0b1116" strokeWidth="4" vectorEffect="non-scaling-stroke" />
      <path d={path} fill="none" stroke="#ffffff" strokeWidth="1.8" vectorEffect="non-scaling-stroke" />
    </svg>
  );
});
