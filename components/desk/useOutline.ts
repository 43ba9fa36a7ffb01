"use client";

import { useCallback, useEffect, useRef, useState } from "react";
import type { DeskTask } from "@/lib/contracts/desk";
import type { DeskController } from "@/lib/desk/controller";
import { bounds } from "@/lib/desk/shapes";
import type { OutlineAnswer, OutlineQuestion } from "./outlineWorker";

/** Room around the box that the worker sees, as a share of its longer side. */
const MARGIN = 0.25;
/** Longest side of the cutting that is looked at, px. */
const SIDE_MAX_PX = 320;

/** Asks a worker for the outline of what is in the selected shape's box. The pointer is never blocked. */
export function useOutline(task: DeskTask, controller: DeskController) {
  const [isRunning, setRunning] = useState(false);
  const worker = useRef<Worker | null>(null);
  const picture = useRef<Promise<ImageBitmap> | null>(null);
  useEffect(() => () => worker.current?.terminate(), []);

  const run = useCallback(async (): Promise<void> => {
    const instance = controller.find(controller.getScene().selectedId);
    if (!instance) return controller.say("Select a box first.");
    setRunning(true);
    try {
      picture.current ??= fetch(task.imageUrl)
        .then((answer) => answer.blob())
        .then((blob) => createImageBitmap(blob));
      const question = cut(await picture.current, bounds(instance.shape));
      worker.current ??= new Worker(new URL("./outlineWorker.ts", import.meta.url), { type: "module" });
      const { rings } = await ask(worker.current, question);
      if (rings.length === 0) controller.say("No outline was found. Draw it by hand.");
      else controller.setOutline(instance.id, { kind: "polygon", rings });
    } catch {
      controller.say("The outline could not be made. Draw it by hand.");
    } finally {
      setRunning(false);
    }
  }, [task, controller]);
  return { run: () => void run(), isRunning };
}

function cut(picture: ImageBitmap, box: readonly [number, number, number, number]): OutlineQuestion {
  const [x, y, width, height] = box;
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
  return {
    width: canvas.width,
    height: canvas.height,
    rgba: data,
    box: [(x - left) * scaleX, (y - top) * scaleY, width * scaleX, height * scaleY],
    toImage: { left, top, scaleX, scaleY },
  };
}

function ask(worker: Worker, question: OutlineQuestion): Promise<OutlineAnswer> {
  return new Promise((resolve, reject) => {
    worker.onmessage = (event: MessageEvent<OutlineAnswer>) => resolve(event.data);
    worker.onerror = () => reject(new Error("the worker failed"));
    worker.postMessage(question, [question.rgba.buffer]);
  });
}
