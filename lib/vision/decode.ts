import sharp from "sharp";
import type { Raster } from "./raster";

export type Decoded = {
  raster: Raster;
  /** Upright size of the original, px. */
  width: number;
  height: number;
  /** Raster px for one original px. */
  scale: number;
};

/**
 * Decodes a picture (bytes or path) upright, on white, as 8-bit RGB, shrunk so that no side is over `maxSide`.
 * Grey, 16-bit, CMYK and alpha are converted. Throws for what is no picture or over `pixelsMax` (50 million).
 */
export async function decodeFile(
  source: Buffer | string,
  { maxSide = Infinity, pixelsMax = 50_000_000 }: { maxSide?: number; pixelsMax?: number } = {},
): Promise<Decoded> {
  const open = () => sharp(source, { limitInputPixels: pixelsMax, failOn: "error", pages: 1 }).autoOrient();
  const {
    width: storedWidth,
    height: storedHeight,
    orientation = 1,
  } = await sharp(source, { limitInputPixels: pixelsMax }).metadata();
  const [width, height] = orientation >= 5 ? [storedHeight, storedWidth] : [storedWidth, storedHeight];
  const scale = Math.min(1, maxSide / Math.max(width, height));
  const pipeline = open().toColourspace("srgb").flatten({ background: "#ffffff" }).removeAlpha();
  if (scale < 1)
    pipeline.resize(Math.max(1, Math.round(width * scale)), Math.max(1, Math.round(height * scale)), {
      fit: "fill",
      kernel: "lanczos3",
    });
  const { data, info } = await pipeline.raw({ depth: "uchar" }).toBuffer({ resolveWithObject: true });
  if (info.channels !== 3) throw new Error(`expected three channels, not ${info.channels}`);
  return {
    raster: { width: info.width, height: info.height, data },
    width,
    height,
    scale: info.width / width,
  };
}
