import { createHash, createHmac, timingSafeEqual } from "node:crypto";
import { S3Error } from "./errors";

/**
 * Verification of AWS Signature Version 4, for headers, presigned addresses and POST policies. The npm packages
 * only sign, which makes them good cross-checks. Source: Amazon S3 API reference, "Authenticating requests (AWS
 * Signature Version 4)"; checked against its worked examples and the Signature Version 4 test suite.
 */
export type Credentials = { accessKeyId: string; secretAccessKey: string; region: string };

export type Signable = {
  method: string;
  path: string;
  query: string;
  headers: Record<string, string>;
  signedHeaders: readonly string[];
  payloadHash: string;
};

/** What later parts of a chunked body are signed with, and what hash of the payload was promised. */
export type Verified = { payloadHash: string; key: Buffer; time: string; scope: string; signature: string };

const ALGORITHM = "AWS4-HMAC-SHA256";
const SKEW_MS_MAX = 15 * 60_000;
const EXPIRES_SECONDS_MAX = 604_800;

export const sha256Hex = (data: string | Uint8Array): string =>
  createHash("sha256").update(data).digest("hex");
export const hmacHex = (key: Uint8Array, data: string): string =>
  createHmac("sha256", key).update(data).digest("hex");
const hmac = (key: string | Uint8Array, data: string): Buffer =>
  createHmac("sha256", key).update(data).digest();

/** Percent-encoding of RFC 3986 with upper-case digits: everything but letters, digits and `-._~`. */
export const encodeRfc3986 = (text: string): string =>
  encodeURIComponent(text).replace(
    /[!'()*]/g,
    (character) => `%${character.charCodeAt(0).toString(16).toUpperCase()}`,
  );

/** Decodes and encodes again, so that every spelling of a path or query has one canonical form. */
function recode(text: string): string {
  try {
    return encodeRfc3986(decodeURIComponent(text));
  } catch {
    throw new S3Error("InvalidArgument", "The address is not validly percent-encoded.");
  }
}

export function canonicalQuery(query: string): string {
  return query
    .split("&")
    .filter((pair) => pair !== "")
    .map((pair) => {
      const cut = pair.indexOf("=");
      const name = cut < 0 ? pair : pair.slice(0, cut);
      return [recode(name), cut < 0 ? "" : recode(pair.slice(cut + 1))] as const;
    })
    .filter(([name]) => name !== "X-Amz-Signature")
    .sort(([a, x], [b, y]) => (a === b ? compare(x, y) : compare(a, b)))
    .map(([name, value]) => `${name}=${value}`)
    .join("&");
}

const compare = (a: string, b: string): number => (a < b ? -1 : a > b ? 1 : 0);

/** Outer blanks go and inner runs become one. Repeated headers come joined by commas, each trimmed by the parser. */
const trimmed = (value: string): string => value.trim().replace(/\s+/g, " ");

/** S3 signs the path as it is: dots and doubled slashes are part of a key and are not normalised. */
export function canonicalRequest({
  method,
  path,
  query,
  headers,
  signedHeaders,
  payloadHash,
}: Signable): string {
  return [
    method,
    path.split("/").map(recode).join("/") || "/",
    canonicalQuery(query),
    ...signedHeaders.map((name) => `${name}:${trimmed(headers[name] ?? "")}`),
    "",
    signedHeaders.join(";"),
    payloadHash,
  ].join("\n");
}

export const stringToSign = (time: string, scope: string, canonical: string): string =>
  [ALGORITHM, time, scope, sha256Hex(canonical)].join("\n");

/** The key of one day, region and service. */
export function signingKey(secret: string, scope: string): Buffer {
  const [day = "", region = "", service = "", terminator = ""] = scope.split("/");
  return hmac(hmac(hmac(hmac(`AWS4${secret}`, day), region), service), terminator);
}

export function sameHex(expected: string, given: string): boolean {
  return expected.length === given.length && timingSafeEqual(Buffer.from(expected), Buffer.from(given));
}

/** "20130524T000000Z" as epoch milliseconds; NaN for anything else. */
export const parseAmzDate = (time: string): number =>
  /^\d{8}T\d{6}Z$/.test(time)
    ? Date.parse(time.replace(/^(\d{4})(\d\d)(\d\d)T(\d\d)(\d\d)(\d\d)Z$/, "$1-$2-$3T$4:$5:$6Z"))
    : Number.NaN;

/** Splits "key/day/region/service/aws4_request" and checks all but the signature. */
export function readCredential(
  credential: string,
  time: string,
  { accessKeyId, region }: Credentials,
): string {
  const [keyId, day, ...rest] = credential.split("/");
  if (keyId !== accessKeyId)
    throw new S3Error("InvalidAccessKeyId", "The access key does not exist in our records.");
  if (rest.join("/") !== `${region}/s3/aws4_request` || day !== time.slice(0, 8)) {
    throw new S3Error(
      "AuthorizationHeaderMalformed",
      `The credential's scope must be ${time.slice(0, 8)}/${region}/s3/aws4_request.`,
    );
  }
  return [day, ...rest].join("/");
}

type Incoming = { method: string; path: string; query: string; headers: Record<string, string> };

/** Verifies a request that is signed in its headers or in its query. Throws S3Error when it is not. */
export function verify(call: Incoming, credentials: Credentials, nowMs: number): Verified {
  const query = new URLSearchParams(call.query.replaceAll("+", "%2B"));
  return query.has("X-Amz-Signature")
    ? verifyPresigned(call, query, credentials, nowMs)
    : verifyHeaders(call, credentials, nowMs);
}

function verifyHeaders(call: Incoming, credentials: Credentials, nowMs: number): Verified {
  const { authorization } = call.headers;
  if (authorization === undefined) throw new S3Error("AccessDenied", "The request is not signed.");
  const fields =
    /^AWS4-HMAC-SHA256\s+Credential=([^,\s]+)\s*,\s*SignedHeaders=([^,\s]+)\s*,\s*Signature=([0-9a-f]{64})$/.exec(
      authorization,
    );
  const [, credential, names, signature] = fields ?? [];
  if (!credential || !names || !signature)
    throw new S3Error("AuthorizationHeaderMalformed", "The authorization header is malformed.");
  const time = call.headers["x-amz-date"] ?? "";
  const scope = readCredential(credential, time, credentials);
  if (!(Math.abs(nowMs - parseAmzDate(time)) <= SKEW_MS_MAX)) {
    throw new S3Error(
      "RequestTimeTooSkewed",
      "The difference between the request time and the current time is too large.",
    );
  }
  const payloadHash = call.headers["x-amz-content-sha256"];
  if (payloadHash === undefined)
    throw new S3Error("InvalidRequest", "Missing required header for this request: x-amz-content-sha256");
  return check(call, credentials, { time, scope, signature, payloadHash, signedHeaders: names.split(";") });
}

function verifyPresigned(
  call: Incoming,
  query: URLSearchParams,
  credentials: Credentials,
  nowMs: number,
): Verified {
  const field = (name: string): string => {
    const value = query.get(name);
    if (value === null)
      throw new S3Error("AccessDenied", `Query-string authentication requires the ${name} parameter.`);
    return value;
  };
  if (field("X-Amz-Algorithm") !== ALGORITHM)
    throw new S3Error("InvalidRequest", `X-Amz-Algorithm only supports ${ALGORITHM}.`);
  const time = field("X-Amz-Date");
  const scope = readCredential(field("X-Amz-Credential"), time, credentials);
  const expiresSeconds = Number(field("X-Amz-Expires"));
  if (!(expiresSeconds >= 0 && expiresSeconds <= EXPIRES_SECONDS_MAX)) {
    throw new S3Error("InvalidRequest", "X-Amz-Expires must be less than a week (in seconds).");
  }
  const startMs = parseAmzDate(time);
  if (!(startMs - SKEW_MS_MAX <= nowMs)) throw new S3Error("AccessDenied", "The request is not yet valid.");
  if (nowMs > startMs + expiresSeconds * 1000) throw new S3Error("AccessDenied", "Request has expired");
  const payloadHash = query.get("X-Amz-Content-Sha256") ?? "UNSIGNED-PAYLOAD";
  const signedHeaders = field("X-Amz-SignedHeaders").split(";");
  return check(call, credentials, {
    time,
    scope,
    signature: field("X-Amz-Signature"),
    payloadHash,
    signedHeaders,
  });
}

type Claimed = {
  time: string;
  scope: string;
  signature: string;
  payloadHash: string;
  signedHeaders: string[];
};

function check(call: Incoming, { secretAccessKey }: Credentials, claimed: Claimed): Verified {
  const { time, scope, signature, payloadHash, signedHeaders } = claimed;
  const unsigned = Object.keys(call.headers).find(
    (name) =>
      name.startsWith("x-amz-") &&
      name !== "x-amz-content-sha256" &&
      name !== "x-amz-user-agent" &&
      !signedHeaders.includes(name),
  );
  if (unsigned !== undefined || !signedHeaders.includes("host")) {
    throw new S3Error(
      "AccessDenied",
      `There were headers present in the request which were not signed: ${unsigned ?? "host"}`,
    );
  }
  const key = signingKey(secretAccessKey, scope);
  const canonical = canonicalRequest({ ...call, signedHeaders, payloadHash });
  if (!sameHex(hmacHex(key, stringToSign(time, scope, canonical)), signature)) {
    throw new S3Error(
      "SignatureDoesNotMatch",
      "The request signature we calculated does not match the signature you provided.",
    );
  }
  return { payloadHash, key, time, scope, signature };
}

/** The signature of one chunk of a chunked body; `kind` PAYLOAD for data, TRAILER for the trailing headers. */
export function chunkSignature(
  { key, time, scope }: Verified,
  previous: string,
  kind: "PAYLOAD" | "TRAILER",
  hash: string,
): string {
  const middle = kind === "PAYLOAD" ? [sha256Hex(""), hash] : [hash];
  return hmacHex(key, [`${ALGORITHM}-${kind}`, time, scope, previous, ...middle].join("\n"));
}
