import type { Box, Point } from "@/lib/geometry/types";

declare const space: unique symbol;
/** A point in px of the upright original image. */
export type ImagePoint = Point & { readonly [space]?: "image" };
/** A point in CSS px of the stage, origin at its top left corner. */
export type ScreenPoint = Point & { readonly [space]?: "screen" };

/** `scale` is CSS px for one image px; x, y is where the image's origin lies on the stage, in CSS px. */
export type Viewport = { readonly scale: number; readonly x: number; readonly y: number };

export const SCALE_MIN = 0.05;
export const SCALE_MAX = 32;

export function toImage(view: Viewport, [x, y]: ScreenPoint): ImagePoint {
  return [(x - view.x) / view.scale, (y - view.y) / view.scale];
}

export function toScreen(view: Viewport, [x, y]: ImagePoint): ScreenPoint {
  return [x * view.scale + view.x, y * view.scale + view.y];
}

/** Zooms by a factor so that the image point under `at` stays under it. Clamped to 5 % .. 3,200 %. */
export function zoomAt(view: Viewport, at: ScreenPoint, factor: number): Viewport {
  const scale = Math.min(SCALE_MAX, Math.max(SCALE_MIN, view.scale * factor));
  const [imageX, imageY] = toImage(view, at);
  return { scale, x: at[0] - imageX * scale, y: at[1] - imageY * scale };
}

export function panBy(view: Viewport, dx: number, dy: number): Viewport {
  return { ...view, x: view.x + dx, y: view.y + dy };
}

/** Shows a box of the image whole and centred on a stage of this size, with a margin in CSS px. */
export function fitBox(box: Box, stageWidth: number, stageHeight: number, marginPx = 24): Viewport {
  const [x, y, width, height] = box;
  const room = (stage: number) => Math.max(1, stage - 2 * marginPx);
  const scale = Math.min(
    SCALE_MAX,
    Math.max(
      SCALE_MIN,
      Math.min(room(stageWidth) / Math.max(width, 1e-9), room(stageHeight) / Math.max(height, 1e-9)),
    ),
  );
  return {
    scale,
    x: stageWidth / 2 - (x + width / 2) * scale,
    y: stageHeight / 2 - (y + height / 2) * scale,
  };
}
