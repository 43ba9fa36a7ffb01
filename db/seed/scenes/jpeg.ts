import sharp from "sharp";
import { pixelToUpright, uprightSize, type Orientation } from "@/lib/geometry/orientation";

export type JpegOptions = {
  quality?: number;
  /** EXIF orientation tag: pixels are stored turned, so that a reader that obeys the tag sees the scene upright. */
  exifOrientation?: Orientation;
};

type Raster = { width: number; height: number; data: Uint8Array };

/** The scene as a JPEG. */
export function encodeJpeg(
  { raster }: { raster: Raster },
  { quality = 90, exifOrientation = 1 }: JpegOptions = {},
): Promise<Buffer> {
  const { data, width, height } = exifOrientation === 1 ? raster : stored(raster, exifOrientation);
  const image = sharp(data, { raw: { width, height, channels: 3 } }).jpeg({
    quality,
    chromaSubsampling: "4:2:0",
  });
  return (exifOrientation === 1 ? image : image.withMetadata({ orientation: exifOrientation })).toBuffer();
}

/** Pixels as a camera held this way would have stored them. */
function stored(upright: Raster, orientation: Orientation): Raster {
  // The upright size of a picture of the upright size is the stored size: turning by quarters swaps sides both ways.
  const [width, height] = uprightSize(upright.width, upright.height, orientation);
  const data = new Uint8Array(width * height * 3);
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const [ux, uy] = pixelToUpright([x, y], width, height, orientation);
      const from = (uy * upright.width + ux) * 3;
      const to = (y * width + x) * 3;
      data[to] = upright.data[from]!;
      data[to + 1] = upright.data[from + 1]!;
      data[to + 2] = upright.data[from + 2]!;
    }
  }
  return { width, height, data };
}
