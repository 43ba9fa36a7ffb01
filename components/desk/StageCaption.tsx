"use client";

import { Button } from "@/components/ui/Button";
import { cn } from "@/components/ui/cn";
import type { DeskController, Scene } from "@/lib/desk/controller";
import type { KeyTable } from "@/lib/desk/keys";

type Props = { controller: DeskController; scene: Scene; keys: KeyTable };

/** One line at the head of the sheet: what to do, what went wrong, and the ways to end what is being drawn. */
export function StageCaption({ controller, scene, keys }: Props) {
  const isPlotting = isPlottingIn(scene);
  const isEmpty = scene.document.instances.length === 0 && scene.mode === "idle" && !scene.isWarning;
  const hint = `Drag a box, or click around an object to outline it${scene.dealt.length > 0 ? "; or take what the tray deals" : ""}.`;
  const text = isEmpty ? hint : scene.isWarning || scene.intent ? scene.message : "";
  if (!isPlotting && !text && !scene.intent) return null;
  return (
    <div
      className={cn(
        "bg-paper/95 text-ink border-line pointer-events-none absolute inset-x-0 top-2 mx-auto flex w-fit max-w-[94%] flex-wrap items-center justify-center gap-x-3 gap-y-1 border px-3 py-1.5 text-center text-sm",
        scene.isWarning && "border-disputed border-2",
        isPlotting && !text && "max-sm:hidden",
      )}
    >
      {text ? <span>{text}</span> : null}
      <span className="pointer-events-auto flex flex-wrap justify-center gap-1.5">
        {isPlotting ? (
          <span className="flex gap-1.5 max-sm:hidden">
            <PlottingButtons controller={controller} scene={scene} keys={keys} />
          </span>
        ) : scene.isWarning && scene.canMend ? (
          <Button size="small" onClick={() => controller.repair()} title={`Key ${keys.mend.toUpperCase()}`}>
            Mend it
          </Button>
        ) : scene.intent ? (
          <Button size="small" onClick={() => controller.cancel()}>
            Drop
          </Button>
        ) : null}
      </span>
    </div>
  );
}

/** On a narrow screen the same ways lie over the key, under the thumb, where they hide nothing of the picture. */
export function ThumbBar({ controller, scene, keys }: Props) {
  if (!isPlottingIn(scene)) return null;
  return (
    <div className="bg-paper absolute inset-0 z-10 flex flex-wrap content-center justify-center gap-2 p-3 sm:hidden">
      <PlottingButtons controller={controller} scene={scene} keys={keys} />
    </div>
  );
}

function isPlottingIn(scene: Scene): boolean {
  return scene.mode === "plotting" || scene.mode === "plotting-press";
}

function PlottingButtons({ controller, scene, keys }: Props) {
  return (
    <>
      <Button size="small" onClick={() => controller.finish()}>
        Close
      </Button>
      <Button size="small" onClick={() => controller.extremes()} title={`Key ${keys.extremes.toUpperCase()}`}>
        4 extremes
      </Button>
      {scene.isWarning ? (
        <Button size="small" onClick={() => controller.repair()} title={`Key ${keys.mend.toUpperCase()}`}>
          Mend
        </Button>
      ) : null}
      <Button size="small" onClick={() => controller.stepBack()}>
        Take back
      </Button>
      <Button size="small" onClick={() => controller.cancel()}>
        Drop
      </Button>
    </>
  );
}
