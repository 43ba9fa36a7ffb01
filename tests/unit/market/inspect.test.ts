import { deflateSync } from "node:zlib";
import sharp from "sharp";
import { describe, expect, it } from "vitest";
import { IMAGE_BYTES_MAX } from "@/lib/contracts/batches";
import { inspect } from "@/lib/market/images/checkImage";
import { mediaTypeOf } from "@/lib/market/images/mediaType";
import { golden } from "@/tests/support/golden";

const WIDTH = 40;
const HEIGHT = 30;

const plain = (colour = { r: 200, g: 120, b: 40 }) =>
  sharp({ create: { width: WIDTH, height: HEIGHT, channels: 3, background: colour } });
const refusal = async (bytes: Buffer) => {
  const checked = await inspect(bytes);
  return checked.ok ? "taken" : checked.reason;
};
const accepted = async (bytes: Buffer) => {
  const checked = await inspect(bytes);
  if (!checked.ok) throw new Error(checked.reason);
  return checked;
};
const middleOf = async (image: Buffer) => {
  const { data, info } = await sharp(image).raw().toBuffer({ resolveWithObject: true });
  const at = (Math.floor(info.height / 2) * info.width + Math.floor(info.width / 2)) * info.channels;
  return { channels: info.channels, colour: [...data.subarray(at, at + info.channels)] };
};

/** CRC-32 of ISO/IEC 15948, annex D, as every PNG chunk carries it. */
function crc32(bytes: Buffer): number {
  let crc = 0xffffffff;
  for (const byte of bytes) {
    crc ^= byte;
    for (let bit = 0; bit < 8; bit++) crc = crc & 1 ? (crc >>> 1) ^ 0xedb88320 : crc >>> 1;
  }
  return (crc ^ 0xffffffff) >>> 0;
}

function chunk(type: string, data: Buffer): Buffer {
  const body = Buffer.concat([Buffer.from(type, "latin1"), data]);
  const frame = Buffer.alloc(8);
  frame.writeUInt32BE(data.length, 0);
  frame.writeUInt32BE(crc32(body), 4);
  return Buffer.concat([frame.subarray(0, 4), body, frame.subarray(4)]);
}

/** A PNG that claims any size, with whatever is given as its packed pixels. */
function pngOf(width: number, height: number, pixels: Buffer): Buffer {
  const header = Buffer.alloc(13);
  header.writeUInt32BE(width, 0);
  header.writeUInt32BE(height, 4);
  header.set([8, 0, 0, 0, 0], 8); // 8-bit grey
  return Buffer.concat([
    Buffer.from("\x89PNG\r\n\x1a\n", "latin1"),
    chunk("IHDR", header),
    chunk("IDAT", pixels),
    chunk("IEND", Buffer.alloc(0)),
  ]);
}

describe("the first bytes of a file", () => {
  it.each(["jpeg", "png", "webp", "avif", "tiff"] as const)("say that it is %s", async (format) => {
    const bytes = await plain().toFormat(format).toBuffer();
    expect(mediaTypeOf(bytes)).toBe(`image/${format}`);
    expect(await accepted(bytes)).toMatchObject({ width: WIDTH, height: HEIGHT, orientation: 1 });
  });

  it.each([
    ["a GIF", Buffer.from("GIF89a\x01\x00\x01\x00\x80\x00\x00", "latin1")],
    ["a PDF", Buffer.from("%PDF-1.7\n")],
    ["a script", Buffer.from("<script>alert(1)</script>")],
    ["an SVG", Buffer.from('<svg xmlns="http://www.w3.org/2000/svg" width="9" height="9"/>')],
    ["a zip", Buffer.from("PK\x03\x04", "latin1")],
    ["a WAV", Buffer.from("RIFF\x24\x00\x00\x00WAVEfmt ", "latin1")],
    ["an MP4", Buffer.from("\x00\x00\x00\x18ftypisom\x00\x00\x02\x00isomiso2", "latin1")],
    ["nothing", Buffer.alloc(0)],
  ])("of %s say that it is refused, whatever its name says", async (_what, bytes) => {
    expect(await refusal(bytes)).toMatch(/not a JPEG, PNG, WebP, AVIF or TIFF/);
  });
});

describe("a file that would do harm is refused with its reason", () => {
  it("when its header claims 60,000 x 60,000 px, before anything is unpacked", async () => {
    const before = process.memoryUsage().rss;
    expect(await refusal(pngOf(60_000, 60_000, deflateSync(Buffer.alloc(64))))).toBe(
      "60000 x 60000 px is over 50 megapixels.",
    );
    expect(process.memoryUsage().rss - before).toBeLessThan(200_000_000);
  });

  it("when it is small and really unpacks to more than 50 megapixels", async () => {
    const [width, height] = [8000, 6300];
    const bytes = pngOf(width, height, deflateSync(Buffer.alloc((width + 1) * height)));
    expect(bytes.length).toBeLessThan(100_000);
    expect(await refusal(bytes)).toBe("8000 x 6300 px is over 50 megapixels.");
  });

  it("when it is over 50 MB", async () => {
    expect(await refusal(Buffer.alloc(IMAGE_BYTES_MAX + 1))).toBe("The file is over 50 MB.");
  });

  it("when it moves", async () => {
    const frames = await sharp(
      await Promise.all([plain(), plain({ r: 0, g: 0, b: 0 })].map((frame) => frame.png().toBuffer())),
      { join: { animated: true } },
    )
      .webp()
      .toBuffer();
    expect(mediaTypeOf(frames)).toBe("image/webp");
    expect(await refusal(frames)).toMatch(/Moving pictures are not taken/);
  });

  it.each(["jpeg", "png", "webp", "tiff"] as const)("when a %s is cut off", async (format) => {
    const noise = { type: "gaussian" as const, mean: 120, sigma: 40 };
    const whole = await sharp({ create: { width: 200, height: 150, channels: 3, background: "#000", noise } })
      .toFormat(format)
      .toBuffer();
    expect(await refusal(whole)).toBe("taken");
    expect(await refusal(whole.subarray(0, Math.floor(whole.length * 0.6)))).toMatch(/cannot be read/);
    expect(await refusal(whole.subarray(0, 16))).toMatch(/cannot be read/);
  });

  it("when only the beginning is a picture's", async () => {
    const bytes = Buffer.concat([
      Buffer.from("\x89PNG\r\n\x1a\n", "latin1"),
      Buffer.from("and then a letter"),
    ]);
    expect(await refusal(bytes)).toMatch(/cannot be read/);
  });
});

describe("the working copy", () => {
  it("carries no camera, no place and no comment", async () => {
    const bytes = await plain()
      .withExif({ IFD0: { Make: "PoleCam", Artist: "Isla" }, IFD3: { GPSLatitude: "57/1 3/1 0/1" } })
      .jpeg()
      .toBuffer();
    expect((await sharp(bytes).metadata()).exif?.includes("PoleCam")).toBe(true);
    const { working, thumb } = await accepted(bytes);
    for (const copy of [working, thumb]) {
      const { exif, xmp, iptc, icc, comments } = await sharp(copy).metadata();
      expect([exif, xmp, iptc, icc, comments]).toEqual([
        undefined,
        undefined,
        undefined,
        undefined,
        undefined,
      ]);
      expect(copy.includes("PoleCam")).toBe(false);
    }
  });

  it("keeps every pixel of a file without loss, and stays a photograph for one", async () => {
    const pixels = Buffer.from(Array.from({ length: WIDTH * HEIGHT * 3 }, (_, n) => (n * 37) % 256));
    const raw = { raw: { width: WIDTH, height: HEIGHT, channels: 3 as const } };
    const lossless = await accepted(await sharp(pixels, raw).png().toBuffer());
    expect(lossless.workingType).toBe("image/png");
    expect(await sharp(lossless.working).raw().toBuffer()).toEqual(pixels);
    expect((await accepted(await plain().jpeg().toBuffer())).workingType).toBe("image/jpeg");
  });

  it.each<[string, () => Promise<Buffer>, number[], number]>([
    ["16-bit PNG", () => plain().toColourspace("rgb16").png().toBuffer(), [200, 120, 40], 1],
    ["grey JPEG", () => plain().greyscale().jpeg({ quality: 100 }).toBuffer(), [137, 137, 137], 3],
    [
      "CMYK JPEG",
      // Sand: a colour that four inks can show, so that only the conversion there and back is left.
      () => plain({ r: 150, g: 140, b: 130 }).toColourspace("cmyk").jpeg({ quality: 100 }).toBuffer(),
      [150, 140, 130],
      12,
    ],
    [
      "half clear PNG, on white",
      () => plain().ensureAlpha(0.5).png().toBuffer(),
      [228, 188, 148], // each (value + 255) / 2
      2,
    ],
  ])("of a %s is plain 8-bit RGB of the same look", async (_what, make, colour, tolerance) => {
    const { working, thumb } = await accepted(await make());
    for (const copy of [working, thumb]) {
      const { depth, hasAlpha, space } = await sharp(copy).metadata();
      expect({ depth, hasAlpha, space }).toEqual({ depth: "uchar", hasAlpha: false, space: "srgb" });
    }
    const middle = await middleOf(working);
    expect(middle.channels).toBe(3);
    middle.colour.forEach((value, n) =>
      expect(Math.abs(value - (colour[n] ?? 0))).toBeLessThanOrEqual(tolerance),
    );
  });

  it("has a thumbnail of at most 480 px that is never larger than the picture", async () => {
    const { thumb } = await accepted(await plain().jpeg().toBuffer());
    expect(await sharp(thumb).metadata()).toMatchObject({ width: WIDTH, height: HEIGHT, format: "webp" });
    const large = await sharp({ create: { width: 1200, height: 600, channels: 3, background: "#888" } })
      .png()
      .toBuffer();
    expect(await sharp((await accepted(large)).thumb).metadata()).toMatchObject({ width: 480, height: 240 });
  });
});

type Turned = {
  orientation: number;
  stored_size: [number, number];
  display_size: [number, number];
  pixels: { stored: [number, number]; display: [number, number] }[];
};
const { header, cases } = golden<Turned>("geometry", "exif_orientation");

describe.skipIf(cases.length === 0)(`all EXIF orientations come out upright (${header.made})`, () => {
  it.each(cases)("orientation $orientation of $stored_size px", async (turned) => {
    const [width, height] = turned.stored_size;
    // Each pixel says where it was stored.
    const pixels = Buffer.alloc(width * height * 3);
    for (let y = 0; y < height; y++)
      for (let x = 0; x < width; x++) pixels.set([x * 20, y * 20, 99], (y * width + x) * 3);
    const bytes = await sharp(pixels, { raw: { width, height, channels: 3 } })
      .withMetadata({ orientation: turned.orientation })
      .png()
      .toBuffer();
    const checked = await accepted(bytes);
    expect([checked.width, checked.height]).toEqual(turned.display_size);
    expect(checked.orientation).toBe(turned.orientation);
    const upright = await sharp(checked.working).raw().toBuffer();
    expect((await sharp(checked.working).metadata()).orientation).toBeUndefined();
    for (const { stored, display } of turned.pixels) {
      const at = (display[1] * checked.width + display[0]) * 3;
      expect([...upright.subarray(at, at + 2)]).toEqual([stored[0] * 20, stored[1] * 20]);
    }
  });
});
