import type { Box, Rings } from "@/lib/geometry/types";
import { outlineInBox } from "@/lib/vision/outline";

export type OutlineQuestion = {
  width: number;
  height: number;
  rgba: Uint8ClampedArray<ArrayBuffer>;
  box: Box;
  /** How the cutting lies in the picture. */
  toImage: { left: number; top: number; scaleX: number; scaleY: number };
};

export type OutlineAnswer = { rings: Rings; confidence: number };

/** Runs beside the page: finds the outline in a cutting and answers in px of the picture. */
self.onmessage = (event: MessageEvent<OutlineQuestion>) => {
  const { width, height, rgba, box, toImage } = event.data;
  const data = new Uint8Array(width * height * 3);
  for (let from = 0, to = 0; from < rgba.length; from += 4, to += 3) {
    data[to] = rgba[from] ?? 0;
    data[to + 1] = rgba[from + 1] ?? 0;
    data[to + 2] = rgba[from + 2] ?? 0;
  }
  const { rings, confidence } = outlineInBox({ width, height, data }, box);
  const answer: OutlineAnswer = {
    confidence,
    rings: rings.map((ring) =>
      ring.map(([x, y]) => [x / toImage.scaleX + toImage.left, y / toImage.scaleY + toImage.top] as const),
    ),
  };
  self.postMessage(answer);
};
