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

export type DecodeOptions = {
  /** The raster's longer side is at most this; the original's own size where absent. */
  maxSide?: number;
  /** Larger pictures are refused before they are decoded. */
  pixelsMax?: number;
};

/** A picture that cannot be used. The message says why, for people. */
export class PictureError extends Error {
  override readonly name = "PictureError";
}

const PIXELS_MAX = 200_000_000;

/**
 * Decodes a picture (bytes or path) upright (EXIF), on white, as 8-bit sRGB; shrunk while decoding where `maxSide` asks for it,
 * so memory follows the raster and not the original. Grey, 16-bit, CMYK and transparent pictures are converted, of
 * an animation the first frame is taken. Throws PictureError for what is no picture, is damaged, or holds more
 * pixels than `pixelsMax` (200 million).
 */
export async function decodeFile(
  source: Buffer | string,
  { maxSide = Infinity, pixelsMax = PIXELS_MAX }: DecodeOptions = {},
): Promise<Decoded> {
  try {
    const options = { limitInputPixels: pixelsMax, failOn: "error", pages: 1, sequentialRead: true } as const;
    const metadata = await sharp(source, options).metadata();
    const isTurned = (metadata.orientation ?? 1) >= 5;
    const stored = { width: metadata.width, height: metadata.pageHeight ?? metadata.height };
    const width = isTurned ? stored.height : stored.width;
    const height = isTurned ? stored.width : stored.height;
    if (width * height > pixelsMax)
      throw new PictureError(`has ${width} x ${height} px, over the limit of ${pixelsMax}`);
    const factor = Math.min(1, maxSide / Math.max(width, height));
    const pipeline = sharp(source, options).autoOrient();
    if (factor < 1) {
      pipeline.resize(Math.max(1, Math.round(width * factor)), Math.max(1, Math.round(height * factor)), {
        fit: "fill",
      });
    }
    pipeline.flatten({ background: "#ffffff" }).toColourspace("srgb").removeAlpha();
    const { data, info } = await pipeline.raw({ depth: "uchar" }).toBuffer({ resolveWithObject: true });
    const raster: Raster = {
      width: info.width,
      height: info.height,
      data: info.channels === 3 ? data : toRgb(data, info.channels),
    };
    // One factor for both sides: a side of a single pixel must not decide it.
    const scale = width >= height ? info.width / width : info.height / height;
    return { raster, width, height, scale };
  } catch (cause) {
    if (cause instanceof PictureError) throw cause;
    throw new PictureError(reasonOf(cause), { cause });
  }
}

/** Grey in one channel or with a second for alpha. */
function toRgb(data: Uint8Array, channels: number): Uint8Array {
  const count = data.length / channels;
  const rgb = new Uint8Array(count * 3);
  for (let i = 0; i < count; i++) rgb.fill(data[i * channels]!, i * 3, i * 3 + 3);
  return rgb;
}

function reasonOf(cause: unknown): string {
  const text = cause instanceof Error ? cause.message : "";
  if (/pixel limit/i.test(text)) return "has more pixels than are allowed";
  if (/unsupported image format|missing|unknown/i.test(text)) return "is no picture in a known format";
  return "is damaged or cut short";
}
