import type { Box, Rings } from "@/lib/geometry/types";
import { outlineInBox, type OutlineHints } from "@/lib/vision/outline";

export type OutlineQuestion = {
  /** Given back with the answer, since a later question may overtake. */
  id: number;
  width: number;
  height: number;
  rgba: Uint8ClampedArray<ArrayBuffer>;
  box: Box;
  /** Points that are certain, in px of the cutting like the box. */
  hints: OutlineHints;
  /** How the cutting lies in the picture. */
  toImage: { left: number; top: number; scaleX: number; scaleY: number };
};

export type OutlineAnswer = { id: number; rings: Rings; confidence: number };

/** Runs beside the page: finds the outline in a cutting and answers in px of the picture. */
self.onmessage = (event: MessageEvent<OutlineQuestion>) => {
  const { id, width, height, rgba, box, hints, toImage } = event.data;
  const data = new Uint8Array(width * height * 3);
  for (let from = 0, to = 0; from < rgba.length; from += 4, to += 3) {
    data[to] = rgba[from] ?? 0;
    data[to + 1] = rgba[from + 1] ?? 0;
    data[to + 2] = rgba[from + 2] ?? 0;
  }
  const { rings, confidence } = outlineInBox({ width, height, data }, box, hints);
  const answer: OutlineAnswer = {
    id,
    confidence,
    rings: rings.map((ring) =>
      ring.map(([x, y]) => [x / toImage.scaleX + toImage.left, y / toImage.scaleY + toImage.top] as const),
    ),
  };
  self.postMessage(answer);
};
