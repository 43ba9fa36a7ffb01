import { maskHas, rasteriseRings } from "@/lib/geometry/mask";
import type { Point, Rings } from "@/lib/geometry/types";
import type { Raster } from "@/lib/vision/raster";

export type Painted = { rings: Rings; colour: readonly [number, number, number] };

/** A picture of flat shapes on a ground, all with a little noise. */
export function paint(
  width: number,
  height: number,
  shapes: readonly Painted[],
  ground: readonly [number, number, number],
  random: () => number,
  noise = 16,
): Raster {
  const data = new Uint8ClampedArray(width * height * 3);
  const masks = shapes.map(({ rings }) => rasteriseRings(rings, width, height));
  for (let i = 0; i < width * height; i++) {
    const own = masks.findLastIndex((mask) => maskHas(mask, i % width, Math.floor(i / width)));
    const colour = own < 0 ? ground : shapes[own]!.colour;
    const grain = (random() - 0.5) * noise;
    for (let c = 0; c < 3; c++) data[i * 3 + c] = colour[c]! + grain;
  }
  return { width, height, data };
}

/** The rings moved by whole px. */
export function polygonOf(rings: Rings, dx: number, dy: number): Rings {
  return rings.map((ring) => ring.map(([x, y]): Point => [x + dx, y + dy]));
}
