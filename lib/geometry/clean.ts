import type { Point, Ring } from "./types";

function isSame(a: Point, b: Point): boolean {
  return a[0] === b[0] && a[1] === b[1];
}

/** Drops each point that equals the one before it (around the end too). */
export function withoutRepeats(ring: Ring): Ring {
  return ring.filter((point, i) => {
    const previous = ring[(i + ring.length - 1) % ring.length];
    return previous === undefined || ring.length === 1 || !isSame(point, previous);
  });
}

/** Drops tips at which the outline turns back on itself, until none is left. Exact: only true reversals count. */
export function withoutSpikes(ring: Ring): Ring {
  const kept: Point[] = [];
  for (const point of ring) {
    kept.push(point);
    while (
      kept.length >= 3 &&
      isSpike(kept[kept.length - 3]!, kept[kept.length - 2]!, kept[kept.length - 1]!)
    ) {
      kept.splice(kept.length - 2, 1);
      if (isSame(kept[kept.length - 1]!, kept[kept.length - 2]!)) kept.pop();
    }
  }
  // The start may sit on a spike as well: look at the two corners where the ring closes.
  for (let changed = true; changed && kept.length >= 3;) {
    const n = kept.length;
    changed = true;
    if (isSame(kept[0]!, kept[n - 1]!)) kept.pop();
    else if (isSpike(kept[n - 2]!, kept[n - 1]!, kept[0]!)) kept.pop();
    else if (isSpike(kept[n - 1]!, kept[0]!, kept[1]!)) kept.shift();
    else changed = false;
  }
  return kept;
}

function isSpike(a: Point, tip: Point, b: Point): boolean {
  const inX = tip[0] - a[0];
  const inY = tip[1] - a[1];
  const outX = b[0] - tip[0];
  const outY = b[1] - tip[1];
  return inX * outY === inY * outX && inX * outX + inY * outY < 0;
}
