"use client";

import { useCallback, useEffect, useRef, useState } from "react";
import type { DeskTask } from "@/lib/contracts/desk";
import type { DeskController } from "@/lib/desk/controller";
import { bounds } from "@/lib/desk/shapes";
import type { Box, Point, Shape } from "@/lib/geometry/types";
import type { OutlineAnswer, OutlineQuestion } from "./outlineWorker";

/** Room around the box that the worker sees, as a share of its longer side. */
const MARGIN = 0.25;
/** Longest side of the cutting that is looked at, px. */
const SIDE_MAX_PX = 320;
/** A stroke counts at points so far apart, px of the cutting. */
const STROKE_STEP_PX = 3;

/** What a person has said about an object: its box, its extreme points, and strokes in it and beside it. */
type Seeds = { box: Box; extremes: readonly Point[]; inside: Point[]; outside: Point[] };

/** Asks a worker for the outline of what is in a shape's box. The pointer is never blocked; Escape drops it. */
export function useOutline(task: DeskTask, controller: DeskController) {
  const [isRunning, setRunning] = useState(false);
  const worker = useRef<Worker | null>(null);
  const picture = useRef<Promise<ImageBitmap> | null>(null);
  const seeds = useRef(new Map<string, Seeds>());
  const asked = useRef(0);
  const waiting = useRef<Promise<void>>(Promise.resolve());
  const second = useRef<Worker | null>(null);
  useEffect(
    () => () => {
      second.current?.terminate();
      second.current = null;
    },
    [],
  );

  const stop = useCallback((): void => {
    asked.current += 1;
    worker.current?.terminate();
    worker.current = null;
    setRunning(false);
  }, []);
  useEffect(() => stop, [stop]);

  const ask = useCallback(
    async (instanceId: string): Promise<void> => {
      const known = seeds.current.get(instanceId);
      if (!known) return;
      const id = ++asked.current;
      setRunning(true);
      try {
        picture.current ??= pictureAt(task.imageUrl);
        const question = cut(await picture.current, known, id);
        if (id !== asked.current) return; // dropped, or asked anew, meanwhile
        worker.current ??= newWorker();
        const { rings } = await answerOf(worker.current, question);
        if (id !== asked.current) return;
        if (rings.length === 0) controller.warn("No outline was found. Draw it by hand.");
        else controller.setOutline(instanceId, { kind: "polygon", rings });
      } catch {
        picture.current = null; // the network may be back at the next try
        controller.warn("The outline could not be made. Draw it by hand.");
      }
      if (id === asked.current) setRunning(false);
    },
    [task.imageUrl, controller],
  );

  /** Outlines the selected shape anew from its box alone. */
  const run = useCallback((): void => {
    const instance = controller.find(controller.getScene().selectedId);
    if (!instance) return controller.warn("Select a box first.");
    seeds.current.set(instance.id, { box: bounds(instance.shape), extremes: [], inside: [], outside: [] });
    void ask(instance.id);
  }, [controller, ask]);

  const fromExtremes = useCallback(
    (instanceId: string, extremes: readonly Point[]): void => {
      const instance = controller.find(instanceId);
      if (!instance) return;
      seeds.current.set(instanceId, { box: bounds(instance.shape), extremes, inside: [], outside: [] });
      void ask(instanceId);
    },
    [controller, ask],
  );

  const addStroke = useCallback(
    (instanceId: string, kind: "inside" | "outside", from: Point, to: Point): void => {
      const instance = controller.find(instanceId);
      if (!instance) return;
      const box = bounds(instance.shape);
      const known = seeds.current.get(instanceId) ?? { box, extremes: [], inside: [], outside: [] };
      const stepPx = Math.max(1, (Math.max(known.box[2], known.box[3]) / SIDE_MAX_PX) * STROKE_STEP_PX);
      known[kind].push(...pointsAlong(from, to, stepPx));
      // What belongs to the object may lie beside the box that it was first given.
      if (kind === "inside") known.box = grown(known.box, [from, to]);
      seeds.current.set(instanceId, known);
      void ask(instanceId);
    },
    [controller, ask],
  );

  const outlineOf = useCallback(
    async (box: Box): Promise<Shape | null> => {
      picture.current ??= pictureAt(task.imageUrl);
      const question = cut(await picture.current, { box, extremes: [], inside: [], outside: [] }, 0);
      second.current ??= newWorker();
      const { rings } = await answerOf(second.current, question);
      return rings.length === 0 ? null : { kind: "polygon", rings };
    },
    [task.imageUrl],
  );

  /**
   * Outlines boxes that a class does not want, one after the other, in a worker of their own: taking three
   * proposals in a row outlines three, and Escape drops none. `standIn` says whether the rectangle is put in
   * where the engine could not be reached; without it such a box stays, to be tried again.
   */
  const outlineBoxes = useCallback(
    (ids: readonly string[], { standIn }: { standIn: boolean }): Promise<void> => {
      waiting.current = waiting.current.then(async () => {
        for (const id of ids) {
          const shape = controller.find(id)?.shape;
          if (shape?.kind !== "box") continue; // undone, or outlined by hand meanwhile
          try {
            controller.outlineBox(id, shape, await outlineOf(shape.box));
          } catch {
            picture.current = null; // the network may be back at the next try
            second.current?.terminate();
            second.current = null;
            if (standIn) controller.outlineBox(id, shape, null);
          }
        }
      });
      return waiting.current;
    },
    [controller, outlineOf],
  );
  const fromTaken = useCallback(
    (id: string): void => void outlineBoxes([id], { standIn: false }),
    [outlineBoxes],
  );
  return { run, stop, fromExtremes, fromTaken, addStroke, outlineBoxes, isRunning };
}

function newWorker(): Worker {
  return new Worker(new URL("./outlineWorker.ts", import.meta.url), { type: "module" });
}

async function pictureAt(url: string): Promise<ImageBitmap> {
  const answer = await fetch(url);
  return createImageBitmap(await answer.blob());
}

function pointsAlong(from: Point, to: Point, stepPx: number): Point[] {
  const count = Math.max(1, Math.ceil(Math.hypot(to[0] - from[0], to[1] - from[1]) / stepPx));
  return Array.from({ length: count + 1 }, (_, i): Point => {
    const share = i / count;
    return [from[0] + (to[0] - from[0]) * share, from[1] + (to[1] - from[1]) * share];
  });
}

function grown([x, y, width, height]: Box, points: readonly Point[]): Box {
  const left = Math.min(x, ...points.map((point) => point[0]));
  const top = Math.min(y, ...points.map((point) => point[1]));
  const right = Math.max(x + width, ...points.map((point) => point[0]));
  const bottom = Math.max(y + height, ...points.map((point) => point[1]));
  return [left, top, right - left, bottom - top];
}

/** Cuts the surroundings of a box out of the picture, no larger than the worker needs. */
function cut(picture: ImageBitmap, seeds: Seeds, id: number): OutlineQuestion {
  const [x, y, width, height] = seeds.box;
  const margin = Math.max(width, height) * MARGIN + 4;
  const left = Math.max(0, Math.floor(x - margin));
  const top = Math.max(0, Math.floor(y - margin));
  const right = Math.min(picture.width, Math.ceil(x + width + margin));
  const bottom = Math.min(picture.height, Math.ceil(y + height + margin));
  const scale = Math.min(1, SIDE_MAX_PX / Math.max(right - left, bottom - top));
  const canvas = new OffscreenCanvas(
    Math.max(8, Math.round((right - left) * scale)),
    Math.max(8, Math.round((bottom - top) * scale)),
  );
  const ink = canvas.getContext("2d");
  if (!ink) throw new Error("no canvas");
  ink.drawImage(picture, left, top, right - left, bottom - top, 0, 0, canvas.width, canvas.height);
  const { data } = ink.getImageData(0, 0, canvas.width, canvas.height);
  const scaleX = canvas.width / (right - left);
  const scaleY = canvas.height / (bottom - top);
  const inCutting = (points: readonly Point[]) =>
    points
      .map(([px, py]): Point => [(px - left) * scaleX, (py - top) * scaleY])
      .filter(([px, py]) => px >= 0 && py >= 0 && px < canvas.width && py < canvas.height);
  return {
    id,
    width: canvas.width,
    height: canvas.height,
    rgba: data,
    box: [(x - left) * scaleX, (y - top) * scaleY, width * scaleX, height * scaleY],
    hints: {
      extremes: inCutting(seeds.extremes),
      inside: inCutting(seeds.inside),
      outside: inCutting(seeds.outside),
    },
    toImage: { left, top, scaleX, scaleY },
  };
}

function answerOf(worker: Worker, question: OutlineQuestion): Promise<OutlineAnswer> {
  return new Promise((resolve, reject) => {
    const listening = new AbortController();
    const { signal } = listening;
    worker.addEventListener(
      "message",
      (event: MessageEvent<OutlineAnswer>) => {
        if (event.data.id !== question.id) return;
        listening.abort();
        resolve(event.data);
      },
      { signal },
    );
    worker.addEventListener(
      "error",
      () => {
        listening.abort();
        reject(new Error("the worker failed"));
      },
      { signal },
    );
    worker.postMessage(question, [question.rgba.buffer]);
  });
}
