/** A picture in memory: RGB, 3 bytes a pixel, rows from the top. */
export type Raster = { width: number; height: number; data: Uint8Array | Uint8ClampedArray };
