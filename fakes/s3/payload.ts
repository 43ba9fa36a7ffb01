import { createHash } from "node:crypto";
import { ALGORITHMS, startChecksum, type Algorithm } from "./checksums";
import { S3Error } from "./errors";
import { chunkSignature, sameHex, sha256Hex, type Verified } from "./sigv4";

export type Received = { byteSize: number; md5: Buffer; checksum?: { algorithm: Algorithm; value: string } };

const HEADER_BYTES_MAX = 16_384;

/**
 * Passes a body on piece by piece to `write` while it checks everything that was promised about it: the signed
 * SHA-256, the signatures of its chunks, its length, Content-MD5 and the checksum of a header or trailer. Throws
 * S3Error when something does not hold; what was written by then must be thrown away. Holds one chunk header
 * and the piece at hand, never the body.
 */
export async function receive(
  body: AsyncIterable<Uint8Array>,
  headers: Record<string, string>,
  signed: Verified,
  write: (bytes: Uint8Array) => void,
): Promise<Received> {
  const { payloadHash } = signed;
  const isFramed = payloadHash.startsWith("STREAMING-");
  if (!isFramed && payloadHash !== "UNSIGNED-PAYLOAD" && !/^[0-9a-f]{64}$/.test(payloadHash)) {
    throw new S3Error(
      "InvalidArgument",
      "x-amz-content-sha256 must be UNSIGNED-PAYLOAD, STREAMING-... or a valid sha256 value.",
    );
  }
  const trailerName = headers["x-amz-trailer"]?.toLowerCase();
  const algorithm = ALGORITHMS.find(
    (name) => trailerName === `x-amz-checksum-${name}` || headers[`x-amz-checksum-${name}`] !== undefined,
  );
  const checksum = algorithm && (await startChecksum(algorithm));
  const md5 = createHash("md5");
  const sha256 = isFramed || payloadHash === "UNSIGNED-PAYLOAD" ? null : createHash("sha256");
  let byteSize = 0;
  const take = (bytes: Uint8Array): void => {
    byteSize += bytes.length;
    md5.update(bytes);
    sha256?.update(bytes);
    checksum?.update(bytes);
    write(bytes);
  };
  let trailers = new Map<string, string>();
  if (isFramed) trailers = await unframe(body, signed, take);
  else for await (const bytes of body) take(bytes);

  const promisedSize = isFramed ? headers["x-amz-decoded-content-length"] : headers["content-length"];
  if (isFramed && promisedSize === undefined)
    throw new S3Error("MissingContentLength", "x-amz-decoded-content-length is required.");
  if (promisedSize !== undefined && Number(promisedSize) !== byteSize) {
    throw new S3Error(
      "IncompleteBody",
      `The body has ${byteSize} bytes, not the ${promisedSize} of its header.`,
    );
  }
  if (sha256 && sha256.digest("hex") !== payloadHash) {
    throw new S3Error(
      "XAmzContentSHA256Mismatch",
      "The provided x-amz-content-sha256 header does not match what was computed.",
    );
  }
  const digest = md5.digest();
  const contentMd5 = headers["content-md5"];
  if (contentMd5 !== undefined) {
    if (Buffer.from(contentMd5, "base64").length !== 16)
      throw new S3Error("InvalidDigest", "The Content-MD5 is not valid.");
    if (contentMd5 !== digest.toString("base64"))
      throw new S3Error("BadDigest", "The Content-MD5 does not match the body.");
  }
  if (!algorithm || !checksum) return { byteSize, md5: digest };
  const promised = headers[`x-amz-checksum-${algorithm}`] ?? trailers.get(`x-amz-checksum-${algorithm}`);
  const value = checksum.digest();
  if (promised !== value) {
    throw new S3Error(
      "BadDigest",
      `The ${algorithm.toUpperCase()} you specified did not match the calculated checksum.`,
    );
  }
  return { byteSize, md5: digest, checksum: { algorithm, value } };
}

/**
 * Takes the aws-chunked framing off: `size[;chunk-signature=...] CRLF data CRLF ... 0 CRLF trailers CRLF`.
 * Where the chunks are signed each signature is checked when its chunk ends, and the trailer's at the end.
 */
async function unframe(
  body: AsyncIterable<Uint8Array>,
  signed: Verified,
  take: (bytes: Uint8Array) => void,
): Promise<Map<string, string>> {
  const isSigned = signed.payloadHash.startsWith("STREAMING-AWS4-HMAC-SHA256-PAYLOAD");
  const hasTrailer = signed.payloadHash.endsWith("-TRAILER");
  if (!isSigned && signed.payloadHash !== "STREAMING-UNSIGNED-PAYLOAD-TRAILER") {
    throw new S3Error("NotImplemented", `${signed.payloadHash} is not supported.`);
  }
  const source = new Source(body);
  let previous = signed.signature;
  for (;;) {
    const header = await source.line();
    const fields = /^([0-9a-fA-F]{1,16})(?:;chunk-signature=([0-9a-f]{64}))?$/.exec(header);
    const size = Number.parseInt(fields?.[1] ?? "", 16);
    if (!fields || !Number.isSafeInteger(size))
      throw new S3Error("IncompleteBody", "The chunk header is malformed.");
    const hash = isSigned ? createHash("sha256") : null;
    let left = size;
    while (left > 0) {
      const bytes = await source.some(left);
      left -= bytes.length;
      hash?.update(bytes);
      take(bytes);
    }
    if (hash) {
      const expected = chunkSignature(signed, previous, "PAYLOAD", hash.digest("hex"));
      if (!sameHex(expected, fields[2] ?? ""))
        throw new S3Error("SignatureDoesNotMatch", "The signature of a chunk does not fit.");
      previous = expected;
    }
    if (size === 0) break;
    if ((await source.line()) !== "")
      throw new S3Error("IncompleteBody", "A chunk is longer than its header says.");
  }
  const trailers = new Map<string, string>();
  let lines = "";
  let trailerSignature = "";
  for (let line = await source.line(true); line !== ""; line = await source.line(true)) {
    const cut = line.indexOf(":");
    const name = line.slice(0, cut).trim().toLowerCase();
    const value = line.slice(cut + 1).trim();
    if (name === "x-amz-trailer-signature") trailerSignature = value;
    else {
      trailers.set(name, value);
      lines += `${name}:${value}\n`;
    }
  }
  if (
    isSigned &&
    hasTrailer &&
    !sameHex(chunkSignature(signed, previous, "TRAILER", sha256Hex(lines)), trailerSignature)
  ) {
    throw new S3Error("SignatureDoesNotMatch", "The signature of the trailer does not fit.");
  }
  return trailers;
}

/** Reads lines and byte runs off a stream of pieces. */
class Source {
  private readonly pieces: AsyncIterator<Uint8Array>;
  private held: Buffer = Buffer.alloc(0);

  constructor(body: AsyncIterable<Uint8Array>) {
    this.pieces = body[Symbol.asyncIterator]();
  }

  private async more(): Promise<boolean> {
    const next = await this.pieces.next();
    if (next.done) return false;
    const piece = Buffer.from(next.value.buffer, next.value.byteOffset, next.value.byteLength);
    this.held = this.held.length === 0 ? piece : Buffer.concat([this.held, piece]);
    return true;
  }

  /** Up to the next CRLF, which is taken too. At the end of the body "" where `orEnd`, else IncompleteBody. */
  async line(orEnd = false): Promise<string> {
    for (;;) {
      const end = this.held.indexOf("\r\n");
      if (end >= 0) {
        const line = this.held.toString("latin1", 0, end);
        this.held = this.held.subarray(end + 2);
        return line;
      }
      if (this.held.length > HEADER_BYTES_MAX) throw new S3Error("IncompleteBody", "The framing is broken.");
      if (!(await this.more())) {
        if (orEnd && this.held.length === 0) return "";
        throw new S3Error("IncompleteBody", "The body breaks off in its framing.");
      }
    }
  }

  /** At least one byte, at most `bytesMax`. */
  async some(bytesMax: number): Promise<Uint8Array> {
    if (this.held.length === 0 && !(await this.more()))
      throw new S3Error("IncompleteBody", "The body breaks off in a chunk.");
    const bytes = this.held.subarray(0, bytesMax);
    this.held = this.held.subarray(bytes.length);
    return bytes;
  }
}
