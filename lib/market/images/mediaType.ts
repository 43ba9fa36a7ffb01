/**
 * The media type that the first bytes of a file say, or null for anything that is not taken. Signatures:
 * JPEG ITU-T T.81, PNG ISO/IEC 15948, WebP RFC 9649, TIFF 6.0 (also BigTIFF), AVIF's ISO base media brands.
 */
export function mediaTypeOf(bytes: Uint8Array): string | null {
  const ascii = (from: number, to: number) => String.fromCharCode(...bytes.subarray(from, to));
  if (bytes[0] === 0xff && bytes[1] === 0xd8 && bytes[2] === 0xff) return "image/jpeg";
  if (ascii(0, 8) === "\x89PNG\r\n\x1a\n") return "image/png";
  if (ascii(0, 4) === "RIFF" && ascii(8, 12) === "WEBP") return "image/webp";
  if (ascii(4, 8) === "ftyp" && /avif|avis/.test(ascii(8, 32))) return "image/avif";
  if (["II*\0", "MM\0*", "II+\0", "MM\0+"].includes(ascii(0, 4))) return "image/tiff";
  return null;
}
