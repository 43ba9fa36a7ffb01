import { createHash } from "node:crypto";
import type { Call } from "../shared/transport";
import { S3Error } from "./errors";
import { hmacHex, readCredential, sameHex, signingKey, type Credentials } from "./sigv4";

export type PostedForm = { key: string; fields: Record<string, string>; byteSize: number; md5: string };

const FIELDS_BYTES_MAX = 20_000;
const HEAD_BYTES_MAX = 4096;

type Limits = { min: number; max: number };

/**
 * Reads a form upload (Amazon S3 API reference, "Browser-based uploads using POST"): the fields before the file
 * decide, so the policy is verified before the first byte of the file is taken. Throws S3Error.
 */
export async function readPost(
  call: Call,
  bucket: string,
  credentials: Credentials,
  nowMs: number,
  write: (bytes: Uint8Array) => void,
): Promise<PostedForm> {
  const boundary = /boundary="?([^";]+)"?/.exec(call.headers["content-type"] ?? "")?.[1];
  if (!boundary)
    throw new S3Error(
      "MalformedPOSTRequest",
      "The body of your POST request is not well-formed multipart/form-data.",
    );
  const parts = new Parts(call.body, boundary);
  const fields: Record<string, string> = {};
  for (;;) {
    const head = await parts.head();
    if (head === null)
      throw new S3Error("MalformedPOSTRequest", "POST requires exactly one file upload per request.");
    if (head.name === "file") return takeFile(head, fields);
    fields[head.name.toLowerCase()] = await parts.text();
  }

  async function takeFile({ filename, type }: Head, given: Record<string, string>): Promise<PostedForm> {
    const template = given.key;
    if (template === undefined)
      throw new S3Error("InvalidArgument", "Bucket POST must contain a field named 'key'.");
    const limits = checkPolicy({ ...given, bucket }, credentials, nowMs);
    const form = { ...(type && { "content-type": type }), ...given };
    const key = template.replaceAll("${filename}", filename);
    const md5 = createHash("md5");
    let byteSize = 0;
    await parts.stream((bytes) => {
      byteSize += bytes.length;
      if (byteSize > limits.max)
        throw new S3Error("EntityTooLarge", "Your proposed upload exceeds the maximum allowed size");
      md5.update(bytes);
      write(bytes);
    });
    if (byteSize < limits.min)
      throw new S3Error("EntityTooSmall", "Your proposed upload is smaller than the minimum allowed size");
    return { key, fields: form, byteSize, md5: md5.digest("hex") };
  }
}

/** Fields that a policy need not mention. */
const FREE = new Set(["policy", "x-amz-signature", "file", "awsaccesskeyid", "bucket"]);

/** Verifies the signature of a policy and every condition in it; returns the allowed length of the file. */
export function checkPolicy(fields: Record<string, string>, credentials: Credentials, nowMs: number): Limits {
  const {
    policy,
    "x-amz-signature": signature = "",
    "x-amz-credential": credential = "",
    "x-amz-date": time = "",
  } = fields;
  if (policy === undefined) throw new S3Error("AccessDenied", "The upload is not signed.");
  if (fields["x-amz-algorithm"] !== "AWS4-HMAC-SHA256")
    throw new S3Error("InvalidArgument", "x-amz-algorithm must be AWS4-HMAC-SHA256.");
  const scope = readCredential(credential, time, credentials);
  if (!sameHex(hmacHex(signingKey(credentials.secretAccessKey, scope), policy), signature)) {
    throw new S3Error(
      "SignatureDoesNotMatch",
      "The request signature we calculated does not match the signature you provided.",
    );
  }
  const document = readPolicy(policy);
  if (!(nowMs <= Date.parse(document.expiration)))
    throw new S3Error("AccessDenied", "Invalid according to Policy: Policy expired.");
  const limits: Limits = { min: 0, max: Number.MAX_SAFE_INTEGER };
  const mentioned = new Set<string>();
  const failed = (condition: unknown) =>
    new S3Error(
      "AccessDenied",
      `Invalid according to Policy: Policy Condition failed: ${JSON.stringify(condition)}`,
    );
  for (const condition of document.conditions) {
    const [kind, left, right] = Array.isArray(condition)
      ? condition.map((part: unknown) => part)
      : ["eq", `$${Object.keys(condition)[0] ?? ""}`, Object.values(condition)[0]];
    if (String(kind).toLowerCase() === "content-length-range") {
      limits.min = Number(left);
      limits.max = Number(right);
      continue;
    }
    const name = String(left).replace(/^\$/, "").toLowerCase();
    mentioned.add(name);
    const value = fields[name] ?? "";
    const holds =
      kind === "starts-with"
        ? value.split(",").every((part) => part.trim().startsWith(String(right)))
        : value === String(right);
    if (!holds) throw failed(condition);
  }
  const extra = Object.keys(fields).find(
    (name) => !mentioned.has(name) && !FREE.has(name) && !name.startsWith("x-ignore-"),
  );
  if (extra !== undefined)
    throw new S3Error("AccessDenied", `Invalid according to Policy: Extra input fields: ${extra}`);
  return limits;
}

function readPolicy(policy: string): {
  expiration: string;
  conditions: (unknown[] | Record<string, unknown>)[];
} {
  try {
    const document: unknown = JSON.parse(Buffer.from(policy, "base64").toString("utf8"));
    if (
      typeof document === "object" &&
      document !== null &&
      "expiration" in document &&
      "conditions" in document &&
      Array.isArray(document.conditions)
    ) {
      const conditions = document.conditions.filter(
        (entry): entry is unknown[] | Record<string, unknown> => typeof entry === "object" && entry !== null,
      );
      return { expiration: String(document.expiration), conditions };
    }
  } catch {
    // Falls through to the one answer for everything that is no policy.
  }
  throw new S3Error("MalformedPOSTRequest", "The policy is not a valid document.");
}

type Head = { name: string; filename: string; type: string | undefined };

/** The parts of a multipart body, one after the other, without holding more than a piece of one. */
class Parts {
  private readonly pieces: AsyncIterator<Uint8Array>;
  private readonly mark: Buffer;
  private held: Buffer = Buffer.from("\r\n"); // so that the first boundary looks like every other
  private fieldBytes = 0;
  private isStarted = false;

  constructor(body: AsyncIterable<Uint8Array>, boundary: string) {
    this.pieces = body[Symbol.asyncIterator]();
    this.mark = Buffer.from(`\r\n--${boundary}`);
  }

  private async more(): Promise<void> {
    const next = await this.pieces.next();
    if (next.done)
      throw new S3Error(
        "MalformedPOSTRequest",
        "The body of your POST request is not well-formed multipart/form-data.",
      );
    this.held = Buffer.concat([this.held, next.value]);
  }

  /** The head of the next part; null after the last. */
  async head(): Promise<Head | null> {
    if (!this.isStarted) await this.stream(() => undefined);
    this.isStarted = true;
    while (this.held.length < 2) await this.more();
    if (this.held.toString("latin1", 0, 2) === "--") return null;
    let end: number;
    while ((end = this.held.indexOf("\r\n\r\n")) < 0) {
      if (this.held.length > HEAD_BYTES_MAX)
        throw new S3Error("MalformedPOSTRequest", "The head of a part is too long.");
      await this.more();
    }
    const head = this.held.toString("utf8", 0, end);
    this.held = this.held.subarray(end + 4);
    return {
      name: / name="([^"]*)"/i.exec(head)?.[1] ?? "",
      filename: (/ filename="([^"]*)"/i.exec(head)?.[1] ?? "").split(/[\\/]/).pop() ?? "",
      type: /^content-type:\s*(.+)$/im.exec(head)?.[1]?.trim(),
    };
  }

  async text(): Promise<string> {
    const pieces: Uint8Array[] = [];
    await this.stream((bytes) => {
      this.fieldBytes += bytes.length;
      if (this.fieldBytes > FIELDS_BYTES_MAX)
        throw new S3Error("MalformedPOSTRequest", "The fields of the form are too long.");
      pieces.push(bytes);
    });
    return Buffer.concat(pieces).toString("utf8");
  }

  /** Everything up to the next boundary, which is taken too. */
  async stream(take: (bytes: Uint8Array) => void): Promise<void> {
    for (;;) {
      const at = this.held.indexOf(this.mark);
      if (at >= 0) {
        take(this.held.subarray(0, at));
        this.held = this.held.subarray(at + this.mark.length);
        return;
      }
      // The tail may be the beginning of a boundary that the next piece ends.
      const sure = Math.max(0, this.held.length - this.mark.length);
      take(this.held.subarray(0, sure));
      this.held = this.held.subarray(sure);
      await this.more();
    }
  }
}
