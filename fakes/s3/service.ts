import { createHash, randomBytes } from "node:crypto";
import { createReadStream, openSync } from "node:fs";
import { Clock } from "../shared/clock";
import { Faults, dropped } from "../shared/faults";
import { control } from "../shared/control";
import type { Answer, Call, Core } from "../shared/transport";
import { isNotModified, readRange, requireWritable } from "./conditions";
import { S3Error } from "./errors";
import { LAST, ObjectStore, type Draft, type ObjectRow } from "./objects";
import { receive, type Received } from "./payload";
import { readPost } from "./postPolicy";
import { encodeRfc3986, verify, type Credentials, type Verified } from "./sigv4";
import { errorXml, readXml, xml, type Element } from "./xml";

export type S3Options = Credentials & { folder: string };
export type S3Service = { core: Core; clock: Clock; close: () => void };

const PART_BYTES_MIN = 5 * 1024 * 1024;
const PART_NUMBER_MAX = 10_000;
const KEY_BYTES_MAX = 1024;
const LIST_MAX = 1000;
const XML_BYTES_MAX = 2_000_000;

/** Headers of a PUT that a GET gives back. */
const KEPT = [
  "content-type",
  "content-disposition",
  "content-encoding",
  "content-language",
  "cache-control",
  "expires",
];

/** Query parameters that name a subresource which this service does not have. */
const UNSUPPORTED = [
  "acl",
  "lifecycle",
  "policy",
  "tagging",
  "versioning",
  "versions",
  "website",
  "encryption",
  "notification",
  "replication",
  "object-lock",
  "legal-hold",
  "retention",
  "torrent",
  "select",
  "restore",
  "attributes",
];

/**
 * The S3 of this machine: objects as files, every request's signature verified, bodies checked as they stream.
 * Times are the clock's, so that expiry can be tested.
 */
export function createS3(options: S3Options): S3Service {
  const store = new ObjectStore(options.folder);
  const clock = new Clock();
  const faults = new Faults();
  const core: Core = async (call) => {
    if (call.path.startsWith("/_control/")) {
      return control(call, {
        reset: () => store.reset(),
        clock: (input) => clock.control(input),
        fault: (input) => faults.control(input),
      });
    }
    const requestId = randomBytes(8).toString("hex").toUpperCase();
    const answer = await guarded(call, requestId);
    if (answer.dropped) return answer;
    return {
      ...answer,
      headers: { ...cors(call), "x-amz-request-id": requestId, server: "local-stand-in", ...answer.headers },
    };
  };
  return { core, clock, close: () => store.close() };

  async function guarded(call: Call, requestId: string): Promise<Answer> {
    try {
      if (call.method === "OPTIONS") return { status: 200 };
      if (call.path === "/" && call.method === "GET" && !call.headers.authorization && call.query === "") {
        return {
          status: 200,
          headers: { "content-type": "text/plain" },
          body: "Local stand-in for S3. Requests must be signed.\n",
        };
      }
      const before = await faults.strike(call, "before");
      if (before) return spoil(before);
      const answer = await answerS3(call, { store, clock, options });
      const after = await faults.strike(call, "after");
      return after ? spoil(after) : answer;
    } catch (error) {
      if (!(error instanceof S3Error)) throw error;
      return errorXml(error, call.path, requestId);
    }
  }

  function spoil({
    action,
    status,
    headers,
  }: {
    action: string;
    status: number;
    headers: Record<string, string>;
  }): Answer {
    if (action === "drop") return dropped;
    const code = status === 503 ? "SlowDown" : "InternalError";
    return {
      status,
      headers: { "content-type": "application/xml", ...headers },
      body: `<?xml version="1.0"?><Error><Code>${code}</Code><Message>Told to fail.</Message></Error>`,
    };
  }
}

/** A browser on any local origin may read and write what it has a signature for, and may see the ETag. */
function cors({ headers }: Call): Record<string, string> {
  if (headers.origin === undefined) return {};
  return {
    "access-control-allow-origin": headers.origin,
    "access-control-allow-methods": "GET, PUT, POST, HEAD, DELETE",
    "access-control-allow-headers": headers["access-control-request-headers"] ?? "*",
    "access-control-expose-headers":
      "ETag, Content-Length, Content-Range, Accept-Ranges, x-amz-request-id, x-amz-checksum-crc32",
    "access-control-max-age": "3600",
    vary: "Origin, Access-Control-Request-Headers",
  };
}

type World = { store: ObjectStore; clock: Clock; options: S3Options };
/** A request whose signature was found right. */
type Signed = World & { call: Call; query: URLSearchParams; bucket: string; key: string; signed: Verified };

async function answerS3(call: Call, world: World): Promise<Answer> {
  const [, bucketPart = "", ...keyParts] = call.path.split("/");
  const bucket = decode(bucketPart);
  const key = decode(keyParts.join("/"));
  if (call.method === "POST" && key === "" && call.headers["content-type"]?.startsWith("multipart/form-data"))
    return postObject(call, bucket, world);
  const signed = verify(call, world.options, world.clock.nowMs());
  const query = new URLSearchParams(call.query.replaceAll("+", "%2B"));
  const unsupported = UNSUPPORTED.find((name) => query.has(name));
  if (unsupported) throw new S3Error("NotImplemented", `The subresource ${unsupported} is not implemented.`);
  if (Buffer.byteLength(key) > KEY_BYTES_MAX) throw new S3Error("KeyTooLongError", "Your key is too long");
  const request: Signed = { ...world, call, query, bucket, key, signed };
  if (bucket === "") return listBuckets(request);
  return key === "" ? answerBucket(request) : answerObject(request);
}

function decode(text: string): string {
  try {
    return decodeURIComponent(text);
  } catch {
    throw new S3Error("InvalidArgument", "The address is not validly percent-encoded.");
  }
}

function listBuckets({ store }: Signed): Answer {
  const buckets = store.listBuckets().map(({ name, createdMs }): Element => [
    "Bucket",
    [
      ["Name", name],
      ["CreationDate", new Date(createdMs).toISOString()],
    ],
  ]);
  return xml(200, "ListAllMyBucketsResult", [
    ["Owner", [["ID", "local"]]],
    ["Buckets", buckets],
  ]);
}

async function answerBucket(request: Signed): Promise<Answer> {
  const { call, store, clock, bucket, query, options } = request;
  if (call.method === "PUT" && !query.has("cors")) {
    if (!/^[a-z0-9][a-z0-9.-]{1,61}[a-z0-9]$/.test(bucket))
      throw new S3Error("InvalidBucketName", "The specified bucket is not valid.");
    await drain(request);
    if (store.listBuckets().some(({ name }) => name === bucket) && options.region !== "us-east-1") {
      throw new S3Error(
        "BucketAlreadyOwnedByYou",
        "Your previous request to create the named bucket succeeded and you already own it.",
      );
    }
    store.createBucket(bucket, clock.nowMs());
    return { status: 200, headers: { location: `/${bucket}` } };
  }
  store.requireBucket(bucket);
  switch (call.method) {
    case "HEAD":
      return { status: 200, headers: { "x-amz-bucket-region": options.region } };
    case "PUT": // Every origin is allowed already; a CORS document is taken and changes nothing.
      await drain(request);
      return { status: 200 };
    case "DELETE":
      store.deleteBucket(bucket);
      return { status: 204 };
    case "POST":
      if (query.has("delete")) return deleteObjects(request);
      break;
    case "GET":
      if (query.has("location"))
        return xml(
          200,
          "LocationConstraint",
          options.region === "us-east-1" ? [] : [["LocationConstraint", options.region]],
        );
      if (query.has("uploads")) return listUploads(request);
      return listObjects(request);
  }
  throw new S3Error("MethodNotAllowed", "The specified method is not allowed against this resource.");
}

function listObjects({ store, bucket, query }: Signed): Answer {
  const isV2 = query.get("list-type") === "2";
  const prefix = query.get("prefix") ?? "";
  const delimiter = query.get("delimiter") ?? "";
  const maxKeys = Math.min(LIST_MAX, readCount(query.get("max-keys"), LIST_MAX));
  const token = query.get("continuation-token");
  const startAfter = (isV2 ? query.get("start-after") : query.get("marker")) ?? "";
  const spell =
    query.get("encoding-type") === "url"
      ? (text: string) => encodeRfc3986(text).replaceAll("%2F", "/")
      : (text: string) => text;
  let after = token === null ? startAfter : Buffer.from(token, "base64url").toString("utf8");
  const contents: Element[] = [];
  const prefixes: Element[] = [];
  let last = "";
  let isTruncated = false;
  scan: for (;;) {
    const rows = maxKeys === 0 ? [] : store.scan(bucket, prefix, after, after !== "", LIST_MAX);
    for (const row of rows) {
      const cut = delimiter === "" ? -1 : row.key.indexOf(delimiter, prefix.length);
      const common = cut < 0 ? null : row.key.slice(0, cut + delimiter.length);
      // A page may end on a common prefix; the token then lies behind all of its keys.
      if (contents.length + prefixes.length === maxKeys) {
        isTruncated = true;
        break scan;
      }
      if (common === null) {
        contents.push(contentOf(row, spell));
        after = last = row.key;
      } else {
        prefixes.push(["CommonPrefixes", [["Prefix", spell(common)]]]);
        after = last = common + LAST;
        continue scan;
      }
    }
    if (rows.length < LIST_MAX) break;
  }
  return xml(200, "ListBucketResult", [
    ["Name", bucket],
    ["Prefix", spell(prefix)],
    ["Delimiter", delimiter === "" ? undefined : spell(delimiter)],
    ["MaxKeys", maxKeys],
    ["EncodingType", query.get("encoding-type") ?? undefined],
    ["IsTruncated", isTruncated],
    ...(isV2
      ? ([
          ["KeyCount", contents.length + prefixes.length],
          ["StartAfter", startAfter === "" ? undefined : spell(startAfter)],
          ["ContinuationToken", token ?? undefined],
          ["NextContinuationToken", isTruncated ? Buffer.from(last).toString("base64url") : undefined],
        ] satisfies Element[])
      : ([
          ["Marker", spell(startAfter)],
          ["NextMarker", isTruncated ? spell(last) : undefined],
        ] satisfies Element[])),
    ...contents,
    ...prefixes,
  ]);
}

function contentOf({ key, byteSize, etag, modifiedMs }: ObjectRow, spell: (text: string) => string): Element {
  return [
    "Contents",
    [
      ["Key", spell(key)],
      ["LastModified", new Date(modifiedMs).toISOString()],
      ["ETag", etag],
      ["Size", byteSize],
      ["StorageClass", "STANDARD"],
    ],
  ];
}

function readCount(text: string | null, fallback: number): number {
  if (text === null) return fallback;
  const count = Number(text);
  if (!Number.isInteger(count) || count < 0)
    throw new S3Error("InvalidArgument", "A count must be a non-negative integer.");
  return count;
}

function listUploads({ store, bucket, query }: Signed): Answer {
  const prefix = query.get("prefix") ?? "";
  const uploads = store
    .listUploads(bucket, prefix)
    .slice(0, LIST_MAX)
    .map(({ key, id, startedMs }): Element => [
      "Upload",
      [
        ["Key", key],
        ["UploadId", id],
        ["Initiated", new Date(startedMs).toISOString()],
      ],
    ]);
  return xml(200, "ListMultipartUploadsResult", [
    ["Bucket", bucket],
    ["Prefix", prefix],
    ["MaxUploads", LIST_MAX],
    ["IsTruncated", false],
    ...uploads,
  ]);
}

async function deleteObjects(request: Signed): Promise<Answer> {
  const { items, root } = readXml(await readText(request), "Delete", "Object");
  if (items.length > LIST_MAX) throw new S3Error("MalformedXML", "At most 1,000 keys are deleted at once.");
  const deleted = items.map(({ Key = "" }): Element => {
    request.store.delete(request.bucket, Key);
    return ["Deleted", [["Key", Key]]];
  });
  return xml(200, "DeleteResult", root.Quiet === "true" ? [] : deleted);
}

async function answerObject(request: Signed): Promise<Answer> {
  const { call, store, bucket, key, query } = request;
  store.requireBucket(bucket);
  const uploadId = query.get("uploadId");
  if (call.method === "POST" && query.has("uploads")) return startMultipart(request);
  if (uploadId !== null) return answerUpload(request, uploadId);
  switch (call.method) {
    case "GET":
    case "HEAD":
      return getObject(request);
    case "PUT":
      return call.headers["x-amz-copy-source"] === undefined ? putObject(request) : copyObject(request);
    case "DELETE":
      store.delete(bucket, key);
      return { status: 204 };
  }
  throw new S3Error("MethodNotAllowed", "The specified method is not allowed against this resource.");
}

const keptHeaders = (headers: Record<string, string>): Record<string, string> => {
  const kept = Object.entries(headers).filter(
    ([name]) => KEPT.includes(name) || name.startsWith("x-amz-meta-"),
  );
  // aws-chunked is how the body travelled, not how it is encoded.
  const encoding = (headers["content-encoding"] ?? "")
    .split(",")
    .map((name) => name.trim())
    .filter((name) => name !== "" && name !== "aws-chunked")
    .join(",");
  const { "content-encoding": _, ...rest } = Object.fromEntries(kept);
  return { ...rest, ...(encoding && { "content-encoding": encoding }) };
};

const quoted = (hex: string): string => `"${hex}"`;

/** Streams the body into a draft and calls `keep` when all was found right; nothing is left when it was not. */
async function receiveDraft<T>(
  { store, call, signed }: { store: ObjectStore; call: Call; signed: Verified },
  keep: (draft: Draft, received: Received) => T,
): Promise<T> {
  const draft = store.openDraft();
  try {
    return keep(draft, await receive(call.body, call.headers, signed, draft.write));
  } catch (error) {
    draft.drop();
    throw error;
  }
}

async function putObject(request: Signed): Promise<Answer> {
  const { store, clock, bucket, key, call } = request;
  requireWritable(call.headers, store.find(bucket, key));
  return receiveDraft(request, (draft, { byteSize, md5, checksum }) => {
    requireWritable(call.headers, store.find(bucket, key)); // again: another PUT may have ended meanwhile
    const etag = quoted(md5.toString("hex"));
    const sum = checksum ? { [`x-amz-checksum-${checksum.algorithm}`]: checksum.value } : {};
    const headers = { "content-type": "application/octet-stream", ...keptHeaders(call.headers), ...sum };
    store.put({ bucket, key, file: draft.keep(), byteSize, etag, modifiedMs: clock.nowMs(), headers });
    return { status: 200, headers: { etag, ...sum } };
  });
}

function getObject({ call, store, bucket, key, query }: Signed): Answer {
  const row = store.get(bucket, key);
  const overrides = KEPT.flatMap((name) => {
    const value = query.get(`response-${name}`);
    return value === null ? [] : [[name, value] as const];
  });
  const withChecksum = call.headers["x-amz-checksum-mode"] === "ENABLED";
  const range = readRange(call.headers.range, row.byteSize);
  const own = Object.entries(row.headers).filter(
    ([name]) => !name.startsWith("x-amz-checksum-") || (withChecksum && !range),
  );
  const headers: Record<string, string> = {
    ...Object.fromEntries(own),
    ...Object.fromEntries(overrides),
    etag: row.etag,
    "last-modified": new Date(row.modifiedMs).toUTCString(),
    "accept-ranges": "bytes",
  };
  if (isNotModified(call.headers, row))
    return { status: 304, headers: { etag: row.etag, "last-modified": headers["last-modified"] ?? "" } };
  const { start, end } = range ?? { start: 0, end: row.byteSize - 1 };
  headers["content-length"] = String(end - start + 1);
  if (range) headers["content-range"] = `bytes ${start}-${end}/${row.byteSize}`;
  const status = range ? 206 : 200;
  if (call.method === "HEAD" || row.byteSize === 0) return { status, headers };
  // The file is opened at once: an object that is replaced while it is read is read to its end as it was.
  const descriptor = openSync(store.pathOf(row.file), "r");
  return {
    status,
    headers,
    body: createReadStream("", { fd: descriptor, start, end, highWaterMark: 256 * 1024 }),
  };
}

async function copyObject(request: Signed): Promise<Answer> {
  const { call, store, clock, bucket, key } = request;
  await drain(request);
  const source = decode((call.headers["x-amz-copy-source"] ?? "").replace(/\?.*$/, "")).replace(/^\//, "");
  const cut = source.indexOf("/");
  if (cut <= 0) throw new S3Error("InvalidArgument", "x-amz-copy-source must be bucket/key.");
  store.requireBucket(source.slice(0, cut));
  const from = store.get(source.slice(0, cut), source.slice(cut + 1));
  const isReplaced = call.headers["x-amz-metadata-directive"] === "REPLACE";
  if (!isReplaced && from.bucket === bucket && from.key === key)
    throw new S3Error("InvalidRequest", "This copy request is illegal because it changes nothing.");
  requireWritable(call.headers, store.find(bucket, key));
  const headers = isReplaced
    ? { "content-type": "application/octet-stream", ...keptHeaders(call.headers) }
    : from.headers;
  const modifiedMs = clock.nowMs();
  store.put({ ...from, bucket, key, file: await store.join([from.file]), modifiedMs, headers });
  return xml(200, "CopyObjectResult", [
    ["LastModified", new Date(modifiedMs).toISOString()],
    ["ETag", from.etag],
  ]);
}

async function startMultipart(request: Signed): Promise<Answer> {
  const { call, store, clock, bucket, key } = request;
  await drain(request);
  const id = randomBytes(24).toString("base64url");
  store.startUpload({
    id,
    bucket,
    key,
    headers: { "content-type": "application/octet-stream", ...keptHeaders(call.headers) },
    startedMs: clock.nowMs(),
  });
  return xml(200, "InitiateMultipartUploadResult", [
    ["Bucket", bucket],
    ["Key", key],
    ["UploadId", id],
  ]);
}

async function answerUpload(request: Signed, uploadId: string): Promise<Answer> {
  const { call, store, bucket, key } = request;
  store.getUpload(uploadId, bucket, key);
  switch (call.method) {
    case "PUT":
      return putPart(request, uploadId);
    case "GET":
      return listParts(request, uploadId);
    case "POST":
      return completeMultipart(request, uploadId);
    case "DELETE":
      store.endUpload(uploadId);
      return { status: 204 };
  }
  throw new S3Error("MethodNotAllowed", "The specified method is not allowed against this resource.");
}

async function putPart(request: Signed, uploadId: string): Promise<Answer> {
  const { store, clock, query, call, bucket, key } = request;
  if (call.headers["x-amz-copy-source"] !== undefined)
    throw new S3Error("NotImplemented", "Parts are not copied here.");
  const number = Number(query.get("partNumber"));
  if (!Number.isInteger(number) || number < 1 || number > PART_NUMBER_MAX) {
    throw new S3Error(
      "InvalidArgument",
      `Part number must be an integer between 1 and ${PART_NUMBER_MAX}, inclusive`,
    );
  }
  return receiveDraft(request, (draft, { byteSize, md5, checksum }) => {
    store.getUpload(uploadId, bucket, key); // it may have been aborted or completed meanwhile
    const etag = quoted(md5.toString("hex"));
    store.putPart(uploadId, {
      number,
      file: draft.keep(),
      byteSize,
      etag,
      modifiedMs: clock.nowMs(),
      checksum: checksum ? `${checksum.algorithm}:${checksum.value}` : null,
    });
    return {
      status: 200,
      headers: { etag, ...(checksum && { [`x-amz-checksum-${checksum.algorithm}`]: checksum.value }) },
    };
  });
}

function listParts({ store, bucket, key, query }: Signed, uploadId: string): Answer {
  const marker = readCount(query.get("part-number-marker"), 0);
  const maxParts = Math.min(LIST_MAX, readCount(query.get("max-parts"), LIST_MAX));
  const rest = store.listParts(uploadId).filter(({ number }) => number > marker);
  const parts = rest.slice(0, maxParts);
  return xml(200, "ListPartsResult", [
    ["Bucket", bucket],
    ["Key", key],
    ["UploadId", uploadId],
    ["PartNumberMarker", marker],
    ["NextPartNumberMarker", parts.at(-1)?.number ?? marker],
    ["MaxParts", maxParts],
    ["IsTruncated", rest.length > parts.length],
    ...parts.map(({ number, etag, byteSize, modifiedMs }): Element => [
      "Part",
      [
        ["PartNumber", number],
        ["LastModified", new Date(modifiedMs).toISOString()],
        ["ETag", etag],
        ["Size", byteSize],
      ],
    ]),
  ]);
}

/** ETag is the MD5 of the parts' MD5s with their number, as S3's is. */
async function completeMultipart(request: Signed, uploadId: string): Promise<Answer> {
  const { store, clock, call, bucket, key } = request;
  const { items } = readXml(await readText(request), "CompleteMultipartUpload", "Part");
  const present = new Map(store.listParts(uploadId).map((part) => [part.number, part]));
  const numbers = items.map(({ PartNumber }) => Number(PartNumber));
  if (numbers.some((number, index) => index > 0 && number <= (numbers[index - 1] ?? 0))) {
    throw new S3Error("InvalidPartOrder", "The list of parts was not in ascending order.");
  }
  const parts = items.map(({ ETag = "" }, index) => {
    const part = present.get(numbers[index] ?? 0);
    if (!part || part.etag.replaceAll('"', "") !== ETag.replaceAll('"', "")) {
      throw new S3Error(
        "InvalidPart",
        `Part ${numbers[index]} could not be found, or its entity tag is another one.`,
      );
    }
    return part;
  });
  if (parts.slice(0, -1).some(({ byteSize }) => byteSize < PART_BYTES_MIN)) {
    throw new S3Error("EntityTooSmall", "Your proposed upload is smaller than the minimum allowed size");
  }
  requireWritable(call.headers, store.find(bucket, key));
  const { headers } = store.getUpload(uploadId, bucket, key);
  const md5 = createHash("md5");
  for (const { etag } of parts) md5.update(etag.replaceAll('"', ""), "hex");
  const etag = quoted(`${md5.digest("hex")}-${parts.length}`);
  const file = await store.join(parts.map((part) => part.file));
  const byteSize = parts.reduce((sum, part) => sum + part.byteSize, 0);
  store.put({ bucket, key, file, byteSize, etag, modifiedMs: clock.nowMs(), headers });
  store.endUpload(uploadId);
  return xml(200, "CompleteMultipartUploadResult", [
    ["Location", `/${bucket}/${key}`],
    ["Bucket", bucket],
    ["Key", key],
    ["ETag", etag],
  ]);
}

/** A browser's form upload with a signed policy. */
async function postObject(call: Call, bucket: string, world: World): Promise<Answer> {
  const { store, clock } = world;
  store.requireBucket(bucket);
  const draft = store.openDraft();
  try {
    const form = await readPost(call, bucket, world.options, clock.nowMs(), draft.write);
    const etag = quoted(form.md5);
    const headers = { "content-type": "application/octet-stream", ...keptHeaders(form.fields) };
    store.put({
      bucket,
      key: form.key,
      file: draft.keep(),
      byteSize: form.byteSize,
      etag,
      modifiedMs: clock.nowMs(),
      headers,
    });
    const location = `/${bucket}/${encodeRfc3986(form.key).replaceAll("%2F", "/")}`;
    const to = form.fields.success_action_redirect;
    if (to !== undefined && URL.canParse(to)) {
      const url = new URL(to);
      for (const [name, value] of Object.entries({ bucket, key: form.key, etag }))
        url.searchParams.set(name, value);
      return { status: 303, headers: { location: url.href, etag } };
    }
    if (form.fields.success_action_status === "201") {
      return xml(
        201,
        "PostResponse",
        [
          ["Location", location],
          ["Bucket", bucket],
          ["Key", form.key],
          ["ETag", etag],
        ],
        { etag, location },
      );
    }
    return { status: form.fields.success_action_status === "200" ? 200 : 204, headers: { etag, location } };
  } catch (error) {
    draft.drop();
    throw error;
  }
}

/** A small body, checked like a large one. */
async function readText({ call, signed }: Signed): Promise<string> {
  const pieces: Uint8Array[] = [];
  let size = 0;
  await receive(call.body, call.headers, signed, (bytes) => {
    size += bytes.length;
    if (size > XML_BYTES_MAX) throw new S3Error("MalformedXML", "The XML is too long.");
    pieces.push(bytes);
  });
  return Buffer.concat(pieces).toString("utf8");
}

async function drain(request: Signed): Promise<void> {
  await readText(request);
}
