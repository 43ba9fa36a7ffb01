import { forEachSpan, type Mask } from "./mask";
import type { Point, Ring, Rings } from "./types";

const RIGHT = 1;
const DOWN = 2;
const LEFT = 4;
const UP = 8;

/**
 * Outlines of a mask along the edges of its pixels: outer rings run clockwise on screen, holes the other way, and
 * the even-odd area equals the number of pixels. Only corners are kept. Rings come in order of their first
 * corner, row by row.
 *
 * Connectivity 4 keeps pixels that touch at a corner only in separate rings (their background then joins through
 * the corner); 8 joins them in one ring that touches itself there. The region is the same either way.
 * O(pixels of the box).
 */
export function traceMask(mask: Mask, connectivity: 4 | 8 = 4): Rings {
  const columns = mask.width + 1;
  const outgoing = outgoingEdges(mask, columns);
  const rings: Ring[] = [];
  for (let start = 0; start < outgoing.length; start++) {
    // The first unvisited corner in reading order always starts an edge to the right or, in a hole, downwards.
    while (outgoing[start] !== 0) rings.push(follow(mask, columns, outgoing, start, connectivity));
  }
  return rings;
}

/** For each corner of the pixel grid, the directions in which an outline leaves it, inside on its right. */
function outgoingEdges(mask: Mask, columns: number): Uint8Array {
  const outgoing = new Uint8Array(columns * (mask.height + 1));
  // One byte a pixel with a margin on every side, so that no neighbour needs a bounds check.
  const stride = mask.width + 2;
  const inside = new Uint8Array(stride * (mask.height + 2));
  forEachSpan(mask, (row, from, to) => {
    const start = (row - mask.y + 1) * stride + 1 - mask.x;
    inside.fill(1, start + from, start + to);
  });
  for (let row = 0; row < mask.height; row++) {
    let pixel = (row + 1) * stride + 1;
    let corner = row * columns;
    for (let column = 0; column < mask.width; column++, pixel++, corner++) {
      if (inside[pixel] === 0) continue;
      if (inside[pixel - stride] === 0) outgoing[corner]! |= RIGHT;
      if (inside[pixel + 1] === 0) outgoing[corner + 1]! |= DOWN;
      if (inside[pixel + stride] === 0) outgoing[corner + columns + 1]! |= LEFT;
      if (inside[pixel - 1] === 0) outgoing[corner + columns]! |= UP;
    }
  }
  return outgoing;
}

function follow(mask: Mask, columns: number, outgoing: Uint8Array, start: number, connectivity: 4 | 8): Ring {
  const ring: Point[] = [];
  let corner = start;
  let direction = 0;
  do {
    const turned = nextDirection(outgoing[corner]!, direction, connectivity);
    if (turned !== direction) {
      ring.push([mask.x + (corner % columns), mask.y + Math.floor(corner / columns)]);
      direction = turned;
    }
    outgoing[corner]! &= ~direction;
    corner += direction === RIGHT ? 1 : direction === LEFT ? -1 : direction === DOWN ? columns : -columns;
  } while (corner !== start || continues(outgoing[corner]!, direction, connectivity));
  return ring;
}

/** At a corner with two ways on, a right turn stays with the same pixel and a left turn crosses to the other one. */
function nextDirection(ways: number, direction: number, connectivity: 4 | 8): number {
  const isSingle = (ways & (ways - 1)) === 0;
  if (isSingle) return ways;
  if (direction === 0) return ways & RIGHT ? RIGHT : ways & DOWN ? DOWN : LEFT;
  const right = direction === UP ? RIGHT : direction << 1;
  const left = direction === RIGHT ? UP : direction >> 1;
  const preferred = connectivity === 4 ? right : left;
  return ways & preferred ? preferred : ways & direction ? direction : ways & right ? right : left;
}

/** Back at the start, an 8-connected ring that touches itself there goes on once more. */
function continues(ways: number, direction: number, connectivity: 4 | 8): boolean {
  if (ways === 0 || connectivity === 4) return false;
  const left = direction === RIGHT ? UP : direction >> 1;
  return (ways & left) !== 0;
}
