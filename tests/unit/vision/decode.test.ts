import sharp from "sharp";
import { describe, expect, it } from "vitest";
import { decodeFile, PictureError } from "@/lib/vision/decode";

const flat = (width: number, height: number, background = { r: 200, g: 40, b: 10, alpha: 1 }) =>
  sharp({ create: { width, height, channels: 4, background } });

describe("decodeFile", () => {
  it("gives 8-bit RGB of grey, 16-bit, transparent and CMYK pictures", async () => {
    const sources = {
      grey: await flat(9, 7).greyscale().png().toBuffer(),
      deep: await flat(9, 7).toColourspace("rgb16").png().toBuffer(),
      deepGrey: await flat(9, 7).toColourspace("grey16").png().toBuffer(),
      alpha: await flat(9, 7, { r: 0, g: 0, b: 0, alpha: 0 }).png().toBuffer(),
      cmyk: await flat(9, 7).toColourspace("cmyk").jpeg().toBuffer(),
      palette: await flat(9, 7).png({ palette: true }).toBuffer(),
    };
    for (const [name, bytes] of Object.entries(sources)) {
      const { raster, width, height, scale } = await decodeFile(bytes);
      expect({ name, width, height, scale, bytes: raster.data.length }).toEqual({
        name,
        width: 9,
        height: 7,
        scale: 1,
        bytes: 189,
      });
      if (name === "alpha") expect([...raster.data.subarray(0, 3)]).toEqual([255, 255, 255]);
    }
  });

  it("turns a picture upright and states the upright size", async () => {
    const bytes = await flat(40, 10).withMetadata({ orientation: 6 }).jpeg().toBuffer();
    const { raster, width, height } = await decodeFile(bytes);
    expect([width, height, raster.width, raster.height]).toEqual([10, 40, 10, 40]);
  });

  it("shrinks to the longer side asked for and states the scale", async () => {
    const { raster, width, height, scale } = await decodeFile(await flat(400, 100).png().toBuffer(), {
      maxSide: 100,
    });
    expect([raster.width, raster.height, width, height, scale]).toEqual([100, 25, 400, 100, 0.25]);
  });

  it("decodes a single pixel and a strip one pixel high", async () => {
    expect((await decodeFile(await flat(1, 1).png().toBuffer())).raster.data).toHaveLength(3);
    const strip = await decodeFile(await flat(20_000, 1).png().toBuffer(), { maxSide: 1600 });
    expect([strip.raster.width, strip.raster.height]).toEqual([1600, 1]);
  });

  it("refuses what is no picture, what is cut short and what is too large, with a reason", async () => {
    const noise = await sharp(Buffer.from(Array.from({ length: 30_000 }, (_, i) => (i * 7919) % 251)), {
      raw: { width: 100, height: 100, channels: 3 },
    })
      .jpeg()
      .toBuffer();
    await expect(decodeFile(Buffer.from("no picture at all"))).rejects.toThrow(PictureError);
    await expect(decodeFile(noise.subarray(0, noise.length >> 1))).rejects.toThrow(/damaged/);
    await expect(decodeFile(await flat(100, 100).png().toBuffer(), { pixelsMax: 9_999 })).rejects.toThrow(
      /pixels|limit/,
    );
    await expect(decodeFile("/no/such/file.png")).rejects.toThrow(PictureError);
  });
});
