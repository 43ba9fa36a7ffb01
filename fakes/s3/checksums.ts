import { createHash } from "node:crypto";
import { crc32 } from "node:zlib";
import { createCRC32, createCRC64 } from "hash-wasm";

/**
 * The checksums that S3 checks while a body arrives, base64 of the big-endian value. CRC32C is polynomial
 * 0x82F63B78 (RFC 3720, appendix B.4), CRC64NVME 0x9A6C9329AC4BC9B5 (NVM Express base specification), both reflected.
 */
export const ALGORITHMS = ["crc32", "crc32c", "crc64nvme", "sha1", "sha256"] as const;
export type Algorithm = (typeof ALGORITHMS)[number];

export type Checksum = { update: (bytes: Uint8Array) => void; digest: () => string };

const base64OfHex = (hex: string): string => Buffer.from(hex, "hex").toString("base64");

export async function startChecksum(algorithm: Algorithm): Promise<Checksum> {
  switch (algorithm) {
    case "crc32": {
      let value = 0;
      return {
        update: (bytes) => (value = crc32(bytes, value)),
        digest: () => base64OfHex(value.toString(16).padStart(8, "0")),
      };
    }
    case "crc32c": {
      const hash = (await createCRC32(0x82f63b78)).init();
      return { update: (bytes) => hash.update(bytes), digest: () => base64OfHex(hash.digest("hex")) };
    }
    case "crc64nvme": {
      const hash = (await createCRC64("9a6c9329ac4bc9b5")).init();
      return { update: (bytes) => hash.update(bytes), digest: () => base64OfHex(hash.digest("hex")) };
    }
    case "sha1":
    case "sha256": {
      const hash = createHash(algorithm);
      return { update: (bytes) => hash.update(bytes), digest: () => hash.digest("base64") };
    }
  }
}
