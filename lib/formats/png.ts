import { deflateSync, inflateSync } from "node:zlib";
import { FormatError } from "./dataset";

/**
 * Index images: one number a pixel, as grey levels of 8 or 16 bits or as places in a palette. General image libraries turn
 * palettes into colours and so lose the numbers, hence this small codec. Source: PNG, W3C Recommendation, third
 * edition, 2025 (ISO/IEC 15948).
 */
export type IndexImage = {
  readonly width: number;
  readonly height: number;
  /** Row by row. */
  readonly values: Uint16Array;
};

export type PngKind = "grey8" | "grey16" | "palette";

const SIGNATURE = Uint8Array.of(0x89, 0x50, 0x4e, 0x47, 0x0d, 0x0a, 0x1a, 0x0a);
const GREY = 0;
const PALETTE = 3;

/**
 * Writes an index image. "grey8" and "palette" hold numbers to 255, "grey16" to 65,535; throws RangeError beyond. The
 * palette colours are those of `paletteColour`. The same input gives the same bytes.
 */
export function encodePng({ width, height, values }: IndexImage, kind: PngKind): Uint8Array {
  const bytesPerPixel = kind === "grey16" ? 2 : 1;
  const max = kind === "grey16" ? 0xffff : 0xff;
  const stride = width * bytesPerPixel + 1;
  const raw = new Uint8Array(stride * height);
  for (let row = 0; row < height; row++) {
    for (let column = 0; column < width; column++) {
      const value = values[row * width + column] ?? 0;
      if (value > max) throw new RangeError(`${value} does not fit a ${kind} image`);
      const at = row * stride + 1 + column * bytesPerPixel;
      if (bytesPerPixel === 2) raw[at] = value >> 8;
      raw[at + bytesPerPixel - 1] = value & 0xff;
    }
  }
  const header = new Uint8Array(13);
  const view = new DataView(header.buffer);
  view.setUint32(0, width);
  view.setUint32(4, height);
  header[8] = 8 * bytesPerPixel;
  header[9] = kind === "palette" ? PALETTE : GREY;
  const chunks = [chunk("IHDR", header)];
  if (kind === "palette") chunks.push(chunk("PLTE", paletteBytes()));
  chunks.push(chunk("IDAT", deflateSync(raw, { level: 9 })), chunk("IEND", new Uint8Array()));
  return Buffer.concat([SIGNATURE, ...chunks]);
}

/**
 * Reads an index image: grey or palette, 1 to 16 bits, not interlaced. Throws FormatError for anything else, for a damaged
 * file and for more pixels than `pixelsMax`.
 */
export function decodePng(bytes: Uint8Array, pixelsMax = 2 ** 28): IndexImage {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (!SIGNATURE.every((byte, i) => bytes[i] === byte)) throw new FormatError("", "is not a PNG file");
  const data: Uint8Array[] = [];
  let header: Uint8Array | undefined;
  for (let at = 8; ;) {
    if (at + 12 > bytes.length) throw new FormatError("", "the PNG file ends too early");
    const length = view.getUint32(at);
    const type = String.fromCharCode(...bytes.subarray(at + 4, at + 8));
    if (at + 12 + length > bytes.length) throw new FormatError("", "the PNG file ends too early");
    const body = bytes.subarray(at + 8, at + 8 + length);
    if (crc32(bytes.subarray(at + 4, at + 8 + length)) !== view.getUint32(at + 8 + length)) {
      throw new FormatError("", `chunk ${JSON.stringify(type)} of the PNG file is damaged`);
    }
    if (type === "IHDR") header = body;
    else if (type === "IDAT") data.push(body);
    else if (type === "IEND") break;
    at += 12 + length;
  }
  if (header?.length !== 13) throw new FormatError("", "the PNG file has no header");
  const head = new DataView(header.buffer, header.byteOffset, 13);
  const width = head.getUint32(0);
  const height = head.getUint32(4);
  const depth = head.getUint8(8);
  const colour = head.getUint8(9);
  if (colour !== GREY && colour !== PALETTE)
    throw new FormatError("", "the PNG file holds colours, not numbers of instances");
  if (![1, 2, 4, 8, 16].includes(depth) || (colour === PALETTE && depth === 16)) {
    throw new FormatError("", `the PNG file has ${depth} bits a pixel, which its kind does not allow`);
  }
  if (head.getUint8(12) !== 0) throw new FormatError("", "the PNG file is interlaced, which is not read");
  if (width === 0 || height === 0 || width * height > pixelsMax) {
    throw new FormatError("", `the PNG file is ${width} x ${height} px, which is not read`);
  }
  const stride = Math.ceil((width * depth) / 8) + 1;
  const raw = inflated(Buffer.concat(data), stride * height);
  unfilter(raw, stride, height, Math.max(1, depth >> 3));
  return { width, height, values: unpack(raw, width, height, depth, stride) };
}

function inflated(data: Uint8Array, length: number): Uint8Array {
  let raw: Uint8Array;
  try {
    raw = inflateSync(data, { maxOutputLength: length });
  } catch (cause) {
    throw new FormatError("", "the pixels of the PNG file are damaged", { cause });
  }
  if (raw.length !== length) throw new FormatError("", "the PNG file has too few pixels");
  return raw;
}

function chunk(type: string, body: Uint8Array): Uint8Array {
  const bytes = new Uint8Array(12 + body.length);
  const view = new DataView(bytes.buffer);
  view.setUint32(0, body.length);
  for (let i = 0; i < 4; i++) bytes[4 + i] = type.charCodeAt(i);
  bytes.set(body, 8);
  view.setUint32(8 + body.length, crc32(bytes.subarray(4, 8 + body.length)));
  return bytes;
}

/** Undoes the five row filters in place (section 9 of the recommendation). */
function unfilter(raw: Uint8Array, stride: number, height: number, bytesPerPixel: number): void {
  for (let row = 0; row < height; row++) {
    const start = row * stride;
    const filter = raw[start]!;
    if (filter > 4) throw new FormatError("", "the pixels of the PNG file are damaged");
    for (let i = 1; i < stride; i++) {
      const left = i > bytesPerPixel ? raw[start + i - bytesPerPixel]! : 0;
      const above = row > 0 ? raw[start + i - stride]! : 0;
      const corner = row > 0 && i > bytesPerPixel ? raw[start + i - stride - bytesPerPixel]! : 0;
      const guess =
        filter === 0
          ? 0
          : filter === 1
            ? left
            : filter === 2
              ? above
              : filter === 3
                ? (left + above) >> 1
                : paeth(left, above, corner);
      raw[start + i] = raw[start + i]! + guess;
    }
  }
}

function paeth(left: number, above: number, corner: number): number {
  const guess = left + above - corner;
  const byLeft = Math.abs(guess - left);
  const byAbove = Math.abs(guess - above);
  const byCorner = Math.abs(guess - corner);
  if (byLeft <= byAbove && byLeft <= byCorner) return left;
  return byAbove <= byCorner ? above : corner;
}

function unpack(raw: Uint8Array, width: number, height: number, depth: number, stride: number): Uint16Array {
  const values = new Uint16Array(width * height);
  const mask = (1 << Math.min(8, depth)) - 1;
  for (let row = 0; row < height; row++) {
    for (let column = 0; column < width; column++) {
      const start = row * stride + 1;
      const bit = column * depth;
      const at = start + (bit >> 3);
      values[row * width + column] =
        depth === 16 ? (raw[at]! << 8) | raw[at + 1]! : (raw[at]! >> (8 - depth - (bit & 7))) & mask;
    }
  }
  return values;
}

/**
 * Colour of a number in palette images: the bits of the number spread over red, green and blue from the top bit down, as
 * the Pascal VOC development kit does, so that neighbouring numbers differ and 0 is black.
 */
export function paletteColour(index: number): readonly [number, number, number] {
  let [red, green, blue] = [0, 0, 0];
  for (let place = 0, rest = index; place < 8; place++, rest >>= 3) {
    red |= (rest & 1) << (7 - place);
    green |= ((rest >> 1) & 1) << (7 - place);
    blue |= ((rest >> 2) & 1) << (7 - place);
  }
  return [red, green, blue];
}

function paletteBytes(): Uint8Array {
  return Uint8Array.from(Array.from({ length: 256 }, (_, i) => paletteColour(i)).flat());
}

const CRC_TABLE = Uint32Array.from({ length: 256 }, (_, i) => {
  let value = i;
  for (let bit = 0; bit < 8; bit++) value = value & 1 ? 0xedb88320 ^ (value >>> 1) : value >>> 1;
  return value;
});

/** The check value of a chunk (annex D of the recommendation). */
function crc32(bytes: Uint8Array): number {
  let value = 0xffffffff;
  for (const byte of bytes) value = CRC_TABLE[(value ^ byte) & 0xff]! ^ (value >>> 8);
  return (value ^ 0xffffffff) >>> 0;
}
