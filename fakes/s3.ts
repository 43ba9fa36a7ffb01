import { createHash, createHmac, timingSafeEqual } from "node:crypto";
import { createReadStream, existsSync, mkdirSync, readdirSync, readFileSync, rmSync, statSync, writeFileSync } from "node:fs";
import path from "node:path";
import type { Server } from "node:http";
import { crc32 } from "node:zlib";
import { escapeHtml, readBody, serve, type Call } from "./http";

export type S3Options = { port: number; folder: string; region: string; accessKeyId: string; secretAccessKey: string };

type Meta = { contentType: string; etag: string; byteSize: number; lastModified: string };

class S3Error extends Error {
  constructor(
    readonly status: number,
    readonly code: string,
    message: string,
  ) {
    super(message);
  }
}

const SKEW_MS_MAX = 15 * 60_000;
const hex = (data: string | Buffer) => createHash("sha256").update(data).digest("hex");
const hmac = (key: string | Buffer, data: string) => createHmac("sha256", key).update(data).digest();

/** Percent-encoding of RFC 3986 as Signature Version 4 wants it. */
const encode = (text: string) => encodeURIComponent(text).replace(/[!'()*]/g, (c) => `%${c.charCodeAt(0).toString(16).toUpperCase()}`);

/**
 * The S3 of this machine: objects as files, requests signed by Signature Version 4 (headers and presigned)
 * verified. Supports what the product uses: buckets, objects with ranges and conditions, multipart, CORS.
 */
export function startS3(options: S3Options): Promise<Server> {
  const root = path.resolve(options.folder, "s3");
  mkdirSync(root, { recursive: true });
  return serve(options.port, async (call) => {
    cors(call);
    if (call.method === "OPTIONS") return void call.response.writeHead(204).end();
    if (call.path === "/") return void call.response.writeHead(200, { "content-type": "text/plain" }).end("Local stand-in for S3\n");
    try {
      await answer(call, root, options);
    } catch (error) {
      if (!(error instanceof S3Error)) throw error;
      call.request.resume();
      if (call.response.headersSent) return void call.response.destroy();
      const body = `<?xml version="1.0" encoding="UTF-8"?>\n<Error><Code>${error.code}</Code><Message>${escapeHtml(error.message)}</Message><Resource>${escapeHtml(call.path)}</Resource></Error>`;
      call.response.writeHead(error.status, { "content-type": "application/xml" });
      call.response.end(call.method === "HEAD" ? undefined : body);
    }
  });
}

function cors({ request, response }: Call): void {
  response.setHeader("access-control-allow-origin", request.headers.origin ?? "*");
  response.setHeader("vary", "origin");
  response.setHeader("access-control-allow-methods", "GET, PUT, POST, HEAD, DELETE");
  response.setHeader("access-control-allow-headers", request.headers["access-control-request-headers"] ?? "*");
  response.setHeader("access-control-expose-headers", "etag, content-length, content-range");
  response.setHeader("access-control-max-age", "3600");
}

async function answer(call: Call, root: string, options: S3Options): Promise<void> {
  const payloadHash = verify(call, options);
  const [, bucket = "", ...rest] = call.path.split("/");
  const key = decodeURIComponent(rest.join("/"));
  const place = path.join(root, encodeURIComponent(decodeURIComponent(bucket)));
  if (key === "") return answerBucket(call, place);
  if (!existsSync(place)) throw new S3Error(404, "NoSuchBucket", "There is no such bucket.");
  // Keys become file names by their hash: a key may hold any character, and dots must not climb.
  const file = path.join(place, hex(key));
  const uploadId = call.query.get("uploadId");
  if (call.method === "POST" && call.query.has("uploads")) return startMultipart(call, place, key);
  if (uploadId !== null) return answerMultipart(call, place, key, file, uploadId, payloadHash);
  if (call.method === "PUT") return putObject(call, key, file, payloadHash);
  if (call.method === "GET" || call.method === "HEAD") return getObject(call, file);
  if (call.method === "DELETE") {
    rmSync(file, { force: true });
    rmSync(`${file}.json`, { force: true });
    return void call.response.writeHead(204).end();
  }
  throw new S3Error(405, "MethodNotAllowed", "This is not supported here.");
}

function answerBucket({ method, response }: Call, place: string): void {
  if (method === "PUT") {
    mkdirSync(place, { recursive: true });
    return void response.writeHead(200).end();
  }
  if (!existsSync(place)) throw new S3Error(404, "NoSuchBucket", "There is no such bucket.");
  if (method === "HEAD") return void response.writeHead(200).end();
  const items = readdirSync(place)
    .filter((name) => name.endsWith(".json"))
    .map((name) => JSON.parse(readFileSync(path.join(place, name), "utf8")) as Meta & { key: string })
    .sort((a, b) => (a.key < b.key ? -1 : 1))
    .map((meta) => `<Contents><Key>${escapeHtml(meta.key)}</Key><Size>${meta.byteSize}</Size><ETag>${escapeHtml(meta.etag)}</ETag></Contents>`);
  response.writeHead(200, { "content-type": "application/xml" });
  response.end(`<?xml version="1.0"?><ListBucketResult><KeyCount>${items.length}</KeyCount><IsTruncated>false</IsTruncated>${items.join("")}</ListBucketResult>`);
}

async function putObject(call: Call, key: string, file: string, payloadHash: string): Promise<void> {
  if (call.request.headers["if-none-match"] === "*" && existsSync(file)) {
    throw new S3Error(412, "PreconditionFailed", "There is an object with this key already.");
  }
  const body = await readPayload(call, payloadHash);
  const etag = `"${createHash("md5").update(body).digest("hex")}"`;
  store(file, key, body, { contentType: call.request.headers["content-type"] ?? "application/octet-stream", etag });
  call.response.writeHead(200, { etag }).end();
}

function store(file: string, key: string, body: Buffer, { contentType, etag }: { contentType: string; etag: string }): void {
  writeFileSync(file, body);
  const meta = { key, contentType, etag, byteSize: body.length, lastModified: new Date().toUTCString() };
  writeFileSync(`${file}.json`, JSON.stringify(meta));
}

function getObject({ request, response, method }: Call, file: string): void {
  if (!existsSync(`${file}.json`)) throw new S3Error(404, "NoSuchKey", "There is no such object.");
  const meta = JSON.parse(readFileSync(`${file}.json`, "utf8")) as Meta;
  const size = statSync(file).size;
  const headers = { "content-type": meta.contentType, etag: meta.etag, "last-modified": meta.lastModified, "accept-ranges": "bytes" };
  if (request.headers["if-none-match"] === meta.etag) return void response.writeHead(304, headers).end();
  const range = /^bytes=(\d*)-(\d*)$/.exec(request.headers.range ?? "");
  if (range && (range[1] || range[2])) {
    const start = range[1] ? Number(range[1]) : Math.max(0, size - Number(range[2]));
    const end = range[1] && range[2] ? Math.min(Number(range[2]), size - 1) : size - 1;
    if (start >= size || start > end) throw new S3Error(416, "InvalidRange", "The range lies outside.");
    response.writeHead(206, { ...headers, "content-length": end - start + 1, "content-range": `bytes ${start}-${end}/${size}` });
    if (method === "HEAD") return void response.end();
    createReadStream(file, { start, end }).pipe(response);
    return;
  }
  response.writeHead(200, { ...headers, "content-length": size });
  if (method === "HEAD") return void response.end();
  createReadStream(file).pipe(response);
}

const PART_BYTES_MIN = 5 * 1024 * 1024;

function startMultipart({ request, response }: Call, place: string, key: string): void {
  const uploadId = hex(`${key}${Date.now()}${Math.random()}`).slice(0, 32);
  const folder = path.join(place, `upload-${uploadId}`);
  mkdirSync(folder, { recursive: true });
  writeFileSync(path.join(folder, "about"), JSON.stringify({ key, contentType: request.headers["content-type"] ?? "application/octet-stream" }));
  response.writeHead(200, { "content-type": "application/xml" });
  response.end(`<?xml version="1.0"?><InitiateMultipartUploadResult><Key>${escapeHtml(key)}</Key><UploadId>${uploadId}</UploadId></InitiateMultipartUploadResult>`);
}

async function answerMultipart(call: Call, place: string, key: string, file: string, uploadId: string, payloadHash: string): Promise<void> {
  const folder = path.join(place, `upload-${uploadId}`);
  if (!/^[0-9a-f]{32}$/.test(uploadId) || !existsSync(folder)) throw new S3Error(404, "NoSuchUpload", "There is no such upload.");
  const about = JSON.parse(readFileSync(path.join(folder, "about"), "utf8")) as { key: string; contentType: string };
  if (about.key !== key) throw new S3Error(404, "NoSuchUpload", "There is no such upload.");
  const partFile = (number: number) => path.join(folder, String(number).padStart(5, "0"));
  const tagOf = (body: Buffer) => `"${createHash("md5").update(body).digest("hex")}"`;
  if (call.method === "PUT") {
    const body = await readPayload(call, payloadHash);
    writeFileSync(partFile(Number(call.query.get("partNumber"))), body);
    return void call.response.writeHead(200, { etag: tagOf(body) }).end();
  }
  if (call.method === "GET") {
    const parts = readdirSync(folder)
      .filter((name) => /^\d{5}$/.test(name))
      .sort()
      .map((name) => {
        const body = readFileSync(path.join(folder, name));
        return `<Part><PartNumber>${Number(name)}</PartNumber><ETag>${escapeHtml(tagOf(body))}</ETag><Size>${body.length}</Size></Part>`;
      });
    call.response.writeHead(200, { "content-type": "application/xml" });
    return void call.response.end(`<?xml version="1.0"?><ListPartsResult><Key>${escapeHtml(key)}</Key><UploadId>${uploadId}</UploadId><IsTruncated>false</IsTruncated>${parts.join("")}</ListPartsResult>`);
  }
  if (call.method === "DELETE") {
    rmSync(folder, { recursive: true, force: true });
    return void call.response.writeHead(204).end();
  }
  if (call.method !== "POST") throw new S3Error(405, "MethodNotAllowed", "This is not supported here.");
  const wanted = [...(await readPayload(call, payloadHash)).toString("utf8").matchAll(/<Part>(.*?)<\/Part>/gs)].map(([, inner = ""]) => ({
    number: Number(/<PartNumber>(\d+)</.exec(inner)?.[1]),
    etag: (/<ETag>(.*?)</.exec(inner)?.[1] ?? "").replaceAll("&quot;", '"').replaceAll('"', ""),
  }));
  if (wanted.length === 0) throw new S3Error(400, "MalformedXML", "No part is named.");
  const bodies = wanted.map(({ number, etag }, index) => {
    if (index > 0 && number <= (wanted[index - 1]?.number ?? 0)) throw new S3Error(400, "InvalidPartOrder", "The parts are not in order.");
    if (!existsSync(partFile(number))) throw new S3Error(400, "InvalidPart", `Part ${number} has not arrived.`);
    const body = readFileSync(partFile(number));
    if (tagOf(body) !== `"${etag}"`) throw new S3Error(400, "InvalidPart", `Part ${number} is another one.`);
    if (index < wanted.length - 1 && body.length < PART_BYTES_MIN) throw new S3Error(400, "EntityTooSmall", `Part ${number} is under 5 MiB.`);
    return body;
  });
  const digest = createHash("md5").update(Buffer.concat(bodies.map((body) => createHash("md5").update(body).digest()))).digest("hex");
  const etag = `"${digest}-${bodies.length}"`;
  store(file, key, Buffer.concat(bodies), { contentType: about.contentType, etag });
  rmSync(folder, { recursive: true, force: true });
  call.response.writeHead(200, { "content-type": "application/xml" });
  call.response.end(`<?xml version="1.0"?><CompleteMultipartUploadResult><Key>${escapeHtml(key)}</Key><ETag>${escapeHtml(etag)}</ETag></CompleteMultipartUploadResult>`);
}

/** The body of a request, unframed and checked against what was signed or announced. */
async function readPayload({ request }: Call, payloadHash: string): Promise<Buffer> {
  const raw = await readBody(request, 200_000_000);
  const isFramed = payloadHash.startsWith("STREAMING-");
  const { body, trailers } = isFramed ? unframe(raw) : { body: raw, trailers: new Map<string, string>() };
  const announced = request.headers["x-amz-decoded-content-length"];
  if (isFramed && announced !== undefined && Number(announced) !== body.length) throw new S3Error(400, "IncompleteBody", "The body is not as long as announced.");
  if (/^[0-9a-f]{64}$/.test(payloadHash) && hex(body) !== payloadHash) throw new S3Error(400, "XAmzContentSHA256Mismatch", "The body is not the one that was signed.");
  const checksum = trailers.get("x-amz-checksum-crc32") ?? header(request.headers["x-amz-checksum-crc32"]);
  if (checksum) {
    const actual = Buffer.alloc(4);
    actual.writeUInt32BE(crc32(body));
    if (actual.toString("base64") !== checksum) throw new S3Error(400, "BadDigest", "The checksum does not fit.");
  }
  return body;
}

const header = (value: string | string[] | undefined) => (Array.isArray(value) ? value[0] : value);

/** Takes the aws-chunked framing off: size;signature CRLF data CRLF ... 0 CRLF trailers. */
function unframe(raw: Buffer): { body: Buffer; trailers: Map<string, string> } {
  const chunks: Buffer[] = [];
  let at = 0;
  for (;;) {
    const end = raw.indexOf("\r\n", at);
    if (end < 0) throw new S3Error(400, "IncompleteBody", "The framing breaks off.");
    const size = Number.parseInt(raw.toString("latin1", at, end).split(";")[0] ?? "", 16);
    if (!Number.isFinite(size)) throw new S3Error(400, "IncompleteBody", "The framing is broken.");
    at = end + 2;
    if (size === 0) break;
    if (at + size > raw.length) throw new S3Error(400, "IncompleteBody", "The body breaks off.");
    chunks.push(raw.subarray(at, at + size));
    at += size + 2;
  }
  const trailers = new Map(
    raw
      .toString("latin1", at)
      .split("\r\n")
      .filter((line) => line.includes(":"))
      .map((line) => [line.slice(0, line.indexOf(":")).toLowerCase(), line.slice(line.indexOf(":") + 1).trim()] as const),
  );
  return { body: Buffer.concat(chunks), trailers };
}

/** Verifies the signature of a request; returns the payload hash that was signed. */
function verify({ request, method, path: rawPath, query }: Call, options: S3Options): string {
  const authorization = request.headers.authorization;
  const isPresigned = query.has("X-Amz-Signature");
  let credential: string | undefined, signedHeaders: string | undefined, signature: string | undefined;
  if (isPresigned) {
    credential = query.get("X-Amz-Credential") ?? undefined;
    signedHeaders = query.get("X-Amz-SignedHeaders") ?? undefined;
    signature = query.get("X-Amz-Signature") ?? undefined;
  } else if (authorization?.startsWith("AWS4-HMAC-SHA256 ")) {
    const part = (name: string) => new RegExp(`${name}=([^,\\s]+)`).exec(authorization)?.[1];
    credential = part("Credential");
    signedHeaders = part("SignedHeaders");
    signature = part("Signature");
  }
  if (!credential || !signedHeaders || !signature) throw new S3Error(403, "AccessDenied", "The request is not signed.");
  const [keyId, day = "", region = "", service = "", terminator = ""] = credential.split("/");
  if (keyId !== options.accessKeyId) throw new S3Error(403, "InvalidAccessKeyId", "There is no such key.");
  const time = (isPresigned ? query.get("X-Amz-Date") : header(request.headers["x-amz-date"])) ?? "";
  const atMs = Date.parse(time.replace(/^(\d{4})(\d\d)(\d\d)T(\d\d)(\d\d)(\d\d)Z$/, "$1-$2-$3T$4:$5:$6Z"));
  if (isPresigned) {
    if (!(Date.now() <= atMs + Number(query.get("X-Amz-Expires")) * 1000)) throw new S3Error(403, "AccessDenied", "The address has expired.");
  } else if (!(Math.abs(Date.now() - atMs) <= SKEW_MS_MAX)) {
    throw new S3Error(403, "RequestTimeTooSkewed", "The clocks differ too much.");
  }
  const payloadHash = (isPresigned ? undefined : header(request.headers["x-amz-content-sha256"])) ?? "UNSIGNED-PAYLOAD";
  const canonicalQuery = [...query]
    .filter(([name]) => name !== "X-Amz-Signature")
    .map(([name, value]) => [encode(name), encode(value)] as const)
    .sort((a, b) => (a[0] === b[0] ? (a[1] < b[1] ? -1 : 1) : a[0] < b[0] ? -1 : 1))
    .map(([name, value]) => `${name}=${value}`)
    .join("&");
  const canonicalHeaders = signedHeaders
    .split(";")
    .map((name) => `${name}:${(header(request.headers[name]) ?? "").trim().replace(/\s+/g, " ")}\n`)
    .join("");
  const canonicalPath = rawPath.split("/").map((part) => encode(decodeURIComponent(part))).join("/");
  const canonical = [method, canonicalPath, canonicalQuery, canonicalHeaders, signedHeaders, payloadHash].join("\n");
  const scope = [day, region, service, terminator].join("/");
  const toSign = ["AWS4-HMAC-SHA256", time, scope, hex(canonical)].join("\n");
  const key = hmac(hmac(hmac(hmac(`AWS4${options.secretAccessKey}`, day), region), service), "aws4_request");
  const expected = createHmac("sha256", key).update(toSign).digest("hex");
  const fits = expected.length === signature.length && timingSafeEqual(Buffer.from(expected), Buffer.from(signature));
  if (!fits) throw new S3Error(403, "SignatureDoesNotMatch", "The signature does not fit the request.");
  return payloadHash;
}
