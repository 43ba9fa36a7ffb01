import { describe, expect, it } from "vitest";
import { startChecksum, type Algorithm } from "@/fakes/s3/checksums";
import s3Examples from "../../golden/services/s3-signatures.json";

const sumOf = async (algorithm: Algorithm, ...pieces: string[]) => {
  const checksum = await startChecksum(algorithm);
  for (const piece of pieces) checksum.update(Buffer.from(piece));
  return checksum.digest();
};
const base64 = (hex: string) => Buffer.from(hex, "hex").toString("base64");

describe("the checksum of 123456789", () => {
  // Check values of the catalogue of parametrised CRC algorithms (G. Cook) for CRC-32/ISO-HDLC, CRC-32/ISCSI and
  // CRC-64/NVME; SHA values from FIPS 180-4 implementations (node:crypto).
  it.each([
    ["crc32", "cbf43926"],
    ["crc32c", "e3069283"],
    ["crc64nvme", "ae8b14860a799888"],
    ["sha1", "f7c3bc1d808e04732adf679965ccc34ca7ae3441"],
  ] as const)("by %s is the published one, whole and in pieces", async (algorithm, hex) => {
    expect(await sumOf(algorithm, "123456789")).toBe(base64(hex));
    expect(await sumOf(algorithm, "1", "2345", "", "6789")).toBe(base64(hex));
  });

  it("by CRC-32 agrees with the S3 documentation's example", async () => {
    for (const { text, crc32 } of s3Examples.checksum_examples)
      expect(await sumOf("crc32", text)).toBe(crc32);
  });

  it("that begins with zeros keeps them", async () => {
    // CRC-32 of no bytes is zero.
    expect(await sumOf("crc32")).toBe("AAAAAA==");
  });
});
