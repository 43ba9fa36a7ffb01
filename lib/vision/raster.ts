/** A picture in memory: RGB, 3 bytes a pixel, rows from the top. */
export type Raster = { width: number; height: number; data: Uint8Array | Uint8ClampedArray };

/**
 * A copy whose longer side is at most `sideMax` px, each new pixel the mean of the pixels it covers; the raster
 * itself where it is small enough. O(pixels).
 */
export function shrinkRaster(raster: Raster, sideMax: number): Raster {
  const factor = Math.min(1, sideMax / Math.max(raster.width, raster.height));
  if (factor === 1) return raster;
  const width = Math.max(1, Math.round(raster.width * factor));
  const height = Math.max(1, Math.round(raster.height * factor));
  const source = raster.data;
  const data = new Uint8Array(width * height * 3);
  for (let y = 0; y < height; y++) {
    const fromY = Math.floor((y * raster.height) / height);
    const toY = Math.max(fromY + 1, Math.floor(((y + 1) * raster.height) / height));
    for (let x = 0; x < width; x++) {
      const fromX = Math.floor((x * raster.width) / width);
      const toX = Math.max(fromX + 1, Math.floor(((x + 1) * raster.width) / width));
      let red = 0;
      let green = 0;
      let blue = 0;
      for (let py = fromY; py < toY; py++) {
        let at = (py * raster.width + fromX) * 3;
        for (let px = fromX; px < toX; px++, at += 3) {
          red += source[at]!;
          green += source[at + 1]!;
          blue += source[at + 2]!;
        }
      }
      const share = 1 / ((toY - fromY) * (toX - fromX));
      const at = (y * width + x) * 3;
      data[at] = red * share + 0.5;
      data[at + 1] = green * share + 0.5;
      data[at + 2] = blue * share + 0.5;
    }
  }
  return { width, height, data };
}

/** The part of a raster from (left, top), whole px inside it. O(pixels of the part). */
export function cutRaster(raster: Raster, left: number, top: number, width: number, height: number): Raster {
  const data = new Uint8Array(width * height * 3);
  for (let row = 0; row < height; row++) {
    const start = ((top + row) * raster.width + left) * 3;
    data.set(raster.data.subarray(start, start + width * 3), row * width * 3);
  }
  return { width, height, data };
}
