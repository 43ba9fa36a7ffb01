import { WORK_SIDE_PX } from "./candidates";

/** A part of a picture, whole px, and the side at which it is looked at. */
export type Tile = { left: number; top: number; width: number; height: number; workSide: number };

/** From this many times the working side on, small objects need a closer look. */
const CLOSER_FROM = 1.8;
/**
 * Side of a tile, px, and of its working copy. Few large tiles: small ones spend most of their time on what they share with
 * their neighbours.
 */
const TILE_SIDE_PX = 1280;
const TILE_WORK_PX = 704;
const OVERLAP = 0.2;
/** More tiles would take minutes; beyond, tiles grow. */
const TILES_MAX = 24;

/**
 * The whole picture, then, for one much larger than the working size, a closer look at it: overlapping tiles that cover it, a
 * single one where it is not too large. Every object of up
 * to a fifth of a tile lies whole in one of them.
 */
export function tilesOf(width: number, height: number): Tile[] {
  const whole: Tile = { left: 0, top: 0, width, height, workSide: WORK_SIDE_PX };
  if (Math.max(width, height) < CLOSER_FROM * WORK_SIDE_PX) return [whole];
  let side = TILE_SIDE_PX;
  let columns = starts(width, side);
  let rows = starts(height, side);
  while (columns.length * rows.length > TILES_MAX) {
    side = Math.round(side * 1.15);
    columns = starts(width, side);
    rows = starts(height, side);
  }
  const tiles = rows.flatMap((top) =>
    columns.map((left): Tile => ({
      left,
      top,
      width: Math.min(side, width),
      height: Math.min(side, height),
      workSide: TILE_WORK_PX,
    })),
  );
  return [whole, ...tiles];
}

/** Evenly spread starts of as few stretches as cover `length` with the overlap. */
function starts(length: number, side: number): number[] {
  if (length <= side) return [0];
  const count = Math.ceil((length - side) / (side * (1 - OVERLAP))) + 1;
  return Array.from({ length: count }, (_, n) => Math.round((n * (length - side)) / (count - 1)));
}
