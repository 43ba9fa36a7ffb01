import { boxOfRings } from "@/lib/geometry/box";
import { maskFromBytes, maskToBytes, rasteriseRings } from "@/lib/geometry/mask";
import { traceMask } from "@/lib/geometry/trace";
import type { Point, Ring, Rings } from "@/lib/geometry/types";

/**
 * Outlines of a region after gaps up to about `gapPx` wide are closed (morphological closing by a square; Serra,
 * 1982), as a person draws across a blade of weed. Rings are in px of the picture. O(pixels of the box).
 */
export function closedOutline(
  rings: Rings,
  gapPx: number,
  { width, height }: { width: number; height: number },
): Rings {
  const [x, y, w, h] = boxOfRings(rings);
  const reach = Math.ceil(gapPx / 2);
  const left = Math.max(0, Math.floor(x) - reach - 1);
  const top = Math.max(0, Math.floor(y) - reach - 1);
  const columns = Math.min(width, Math.ceil(x + w) + reach + 1) - left;
  const rows = Math.min(height, Math.ceil(y + h) + reach + 1) - top;
  const local = rings.map((ring): Ring => ring.map(([px, py]): Point => [px - left, py - top]));
  const bytes = maskToBytes(rasteriseRings(local, columns, rows), columns, rows);
  const closed = spread(spread(bytes, columns, rows, reach, 1), columns, rows, reach, 0);
  return traceMask(maskFromBytes(closed, columns, rows)).map((ring) =>
    ring.map(([px, py]): Point => [px + left, py + top]),
  );
}

/** Every pixel within `reach` (in columns and rows) of one with this value takes it; the edge of the picture adds none. */
function spread(from: Uint8Array, columns: number, rows: number, reach: number, value: 0 | 1): Uint8Array {
  const across = new Uint8Array(from.length).fill(1 - value);
  for (let y = 0; y < rows; y++) {
    for (let x = 0; x < columns; x++) {
      if (from[y * columns + x] !== value) continue;
      across.fill(
        value,
        y * columns + Math.max(0, x - reach),
        y * columns + Math.min(columns, x + reach + 1),
      );
    }
  }
  const out = new Uint8Array(from.length).fill(1 - value);
  for (let y = 0; y < rows; y++) {
    for (let x = 0; x < columns; x++) {
      if (across[y * columns + x] !== value) continue;
      for (let near = Math.max(0, y - reach); near <= Math.min(rows - 1, y + reach); near++)
        out[near * columns + x] = value;
    }
  }
  return out;
}
