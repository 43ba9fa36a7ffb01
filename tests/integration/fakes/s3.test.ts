import { createHash, randomBytes } from "node:crypto";
import { readdirSync } from "node:fs";
import path from "node:path";
import { Readable } from "node:stream";
import {
  AbortMultipartUploadCommand,
  CompleteMultipartUploadCommand,
  CopyObjectCommand,
  CreateBucketCommand,
  CreateMultipartUploadCommand,
  DeleteObjectCommand,
  DeleteObjectsCommand,
  GetObjectCommand,
  HeadBucketCommand,
  HeadObjectCommand,
  ListMultipartUploadsCommand,
  ListObjectsV2Command,
  ListPartsCommand,
  PutObjectCommand,
  S3Client,
  UploadPartCommand,
  paginateListObjectsV2,
  type ChecksumAlgorithm,
} from "@aws-sdk/client-s3";
import { Upload } from "@aws-sdk/lib-storage";
import { getSignedUrl } from "@aws-sdk/s3-request-presigner";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { clientsOf, control, s3ConfigOf, startTestFakes, type TestFakes } from "@/tests/support/fakes";

const Bucket = "pictures";
const MIB = 1024 * 1024;

let fakes: TestFakes;
let s3: S3Client;
let presigner: S3Client;

beforeAll(async () => {
  fakes = await startTestFakes();
  ({ s3, presigner } = clientsOf(fakes));
  await s3.send(new CreateBucketCommand({ Bucket }));
});
afterAll(() => fakes.remove());

const read = async (Key: string, extra = {}) => {
  const answer = await s3.send(new GetObjectCommand({ Bucket, Key, ...extra }));
  return { ...answer, bytes: Buffer.from((await answer.Body?.transformToByteArray()) ?? []) };
};
const put = (Key: string, Body: string | Buffer, extra = {}) =>
  s3.send(new PutObjectCommand({ Bucket, Key, Body, ...extra }));
const codeOf = async (work: Promise<unknown>) =>
  work.then(
    () => "done",
    (error: Error & { $metadata?: { httpStatusCode?: number } }) =>
      `${error.$metadata?.httpStatusCode} ${error.name}`,
  );
const xmlCode = async (answer: Response) =>
  `${answer.status} ${/<Code>(.*?)<\/Code>/.exec(await answer.text())?.[1] ?? ""}`.trim();
const filesKept = () =>
  readdirSync(path.join(fakes.folder, "s3", "data"), { recursive: true, withFileTypes: true }).filter(
    (entry) => entry.isFile(),
  ).length;

describe("objects", () => {
  it("come back byte for byte with their type, metadata and the MD5 as ETag", async () => {
    const body = randomBytes(300_000);
    const { ETag } = await put("a/first.png", body, {
      ContentType: "image/png",
      Metadata: { origin: "shore" },
      CacheControl: "no-store",
    });
    expect(ETag).toBe(`"${createHash("md5").update(body).digest("hex")}"`);
    const found = await read("a/first.png");
    expect(found.bytes.equals(body)).toBe(true);
    expect(found).toMatchObject({
      ContentType: "image/png",
      Metadata: { origin: "shore" },
      CacheControl: "no-store",
      ContentLength: 300_000,
      ETag,
    });
    expect(await s3.send(new HeadObjectCommand({ Bucket, Key: "a/first.png" }))).toMatchObject({
      ContentLength: 300_000,
      ETag,
    });
  });

  it.each(["a/../b//c.txt", "ä ö+&=?#%.png", "~'()*!.txt", ".", "日本/図.png"])(
    "are found under the key %j",
    async (key) => {
      await put(key, key);
      expect((await read(key)).bytes.toString()).toBe(key);
      await s3.send(new DeleteObjectCommand({ Bucket, Key: key }));
      expect(await codeOf(read(key))).toBe("404 NoSuchKey");
    },
  );

  it.each([
    ["bytes=0-9", "0123456789", "bytes 0-9/36"],
    ["bytes=30-", "uvwxyz", "bytes 30-35/36"],
    ["bytes=-4", "wxyz", "bytes 32-35/36"],
    ["bytes=30-99", "uvwxyz", "bytes 30-35/36"],
  ])("answer the range %s with 206", async (Range, text, ContentRange) => {
    await put("range", "0123456789abcdefghijklmnopqrstuvwxyz");
    const found = await read("range", { Range });
    expect(found.bytes.toString()).toBe(text);
    expect(found.ContentRange).toBe(ContentRange);
  });

  it("refuse a range behind their end with 416", async () => {
    await put("range", "0123456789abcdefghijklmnopqrstuvwxyz");
    expect(await codeOf(read("range", { Range: "bytes=36-40" }))).toBe("416 InvalidRange");
  });

  it("hold to conditions", async () => {
    const { ETag } = await put("condition", "one");
    expect(await codeOf(put("condition", "two", { IfNoneMatch: "*" }))).toBe("412 PreconditionFailed");
    expect(await codeOf(put("condition", "two", { IfMatch: '"other"' }))).toBe("412 PreconditionFailed");
    expect(await codeOf(read("condition", { IfMatch: '"other"' }))).toBe("412 PreconditionFailed");
    expect(await codeOf(read("condition", { IfNoneMatch: ETag }))).toContain("304");
    expect(await codeOf(put("condition", "two", { IfMatch: ETag }))).toBe("done");
    expect((await read("condition")).bytes.toString()).toBe("two");
  });

  it("are copied with or without new metadata", async () => {
    await put("source ü", "copied", { ContentType: "text/plain", Metadata: { a: "1" } });
    const CopySource = `${Bucket}/${encodeURIComponent("source ü")}`;
    await s3.send(new CopyObjectCommand({ Bucket, Key: "copy", CopySource }));
    expect(await read("copy")).toMatchObject({ ContentType: "text/plain", Metadata: { a: "1" } });
    await s3.send(
      new CopyObjectCommand({
        Bucket,
        Key: "copy",
        CopySource,
        MetadataDirective: "REPLACE",
        ContentType: "text/html",
      }),
    );
    const copy = await read("copy");
    expect(copy.ContentType).toBe("text/html");
    expect(copy.bytes.toString()).toBe("copied");
  });

  it("are read to the end as they were when another version is put meanwhile", async () => {
    const body = randomBytes(8 * MIB);
    await put("swapped", body);
    const answer = await s3.send(new GetObjectCommand({ Bucket, Key: "swapped" }));
    await put("swapped", "new");
    expect(Buffer.from((await answer.Body?.transformToByteArray()) ?? []).equals(body)).toBe(true);
  });

  it("that are empty have a body of no bytes", async () => {
    await put("empty", "");
    expect((await read("empty")).bytes.length).toBe(0);
  });
});

describe("bodies", () => {
  it.each(["CRC32", "CRC32C", "CRC64NVME", "SHA1", "SHA256"] satisfies ChecksumAlgorithm[])(
    "are checked by %s and give it back",
    async (algorithm) => {
      const field = `Checksum${algorithm}`;
      const answer = await put(`sum-${algorithm}`, randomBytes(200_000), { ChecksumAlgorithm: algorithm });
      const found = await read(`sum-${algorithm}`, { ChecksumMode: "ENABLED" });
      expect((found as Record<string, unknown>)[field]).toBe(
        (answer as unknown as Record<string, unknown>)[field],
      );
      expect(await codeOf(put("wrong", "body", { [field]: Buffer.alloc(8).toString("base64") }))).toBe(
        "400 BadDigest",
      );
      expect(await codeOf(read("wrong"))).toBe("404 NoSuchKey");
    },
  );

  it("of a stream travel in signed or unsigned chunks and lose their framing", async () => {
    const body = randomBytes(400_000);
    await s3.send(
      new PutObjectCommand({
        Bucket,
        Key: "stream",
        Body: Readable.from([body.subarray(0, 1), body.subarray(1)]),
        ContentLength: body.length,
      }),
    );
    expect((await read("stream")).bytes.equals(body)).toBe(true);
    expect((await read("stream")).ContentEncoding).toBeUndefined();
  });

  it("leave nothing behind when they are refused", async () => {
    const before = filesKept();
    const url = await getSignedUrl(
      presigner,
      new PutObjectCommand({
        Bucket,
        Key: "refused",
        ContentMD5: createHash("md5").update("other").digest("base64"),
      }),
      { signableHeaders: new Set(["host", "content-md5"]) },
    );
    const answer = await fetch(url, {
      method: "PUT",
      body: "body",
      headers: { "content-md5": createHash("md5").update("other").digest("base64") },
    });
    expect(await xmlCode(answer)).toBe("400 BadDigest");
    expect(filesKept()).toBe(before);
  });
});

describe("signatures", () => {
  const withKeys = (secretAccessKey: string, accessKeyId?: string) => {
    const config = s3ConfigOf(fakes);
    return new S3Client({
      endpoint: config.endpoint,
      region: config.region,
      forcePathStyle: true,
      credentials: { accessKeyId: accessKeyId ?? config.accessKeyId, secretAccessKey },
    });
  };

  it("of another secret, an unknown key or none are refused with 403", async () => {
    await put("signed", "x");
    const get = new GetObjectCommand({ Bucket, Key: "signed" });
    expect(await codeOf(withKeys("other").send(get))).toBe("403 SignatureDoesNotMatch");
    expect(await codeOf(withKeys("other", "AKIAUNKNOWN").send(get))).toBe("403 InvalidAccessKeyId");
    expect(await xmlCode(await fetch(`${fakes.s3.url}/${Bucket}/signed`))).toBe("403 AccessDenied");
  });

  it("are refused when the clocks differ by more than a quarter of an hour", async () => {
    const config = s3ConfigOf(fakes);
    const late = new S3Client({
      endpoint: config.endpoint,
      region: config.region,
      forcePathStyle: true,
      credentials: config,
      systemClockOffset: -20 * 60_000,
      maxAttempts: 1,
    });
    expect(await codeOf(late.send(new GetObjectCommand({ Bucket, Key: "signed" })))).toBe(
      "403 RequestTimeTooSkewed",
    );
  });

  it("in an address hold until it expires, and for nothing else", async () => {
    await put("presigned", "hello");
    const url = await getSignedUrl(
      presigner,
      new GetObjectCommand({
        Bucket,
        Key: "presigned",
        ResponseContentDisposition: 'attachment; filename="a b.txt"',
      }),
      { expiresIn: 60 },
    );
    const answer = await fetch(url);
    expect(await answer.text()).toBe("hello");
    expect(answer.headers.get("content-disposition")).toBe('attachment; filename="a b.txt"');
    expect(await xmlCode(await fetch(url.replace("/presigned", "/range")))).toBe("403 SignatureDoesNotMatch");
    expect(await xmlCode(await fetch(url, { method: "DELETE" }))).toBe("403 SignatureDoesNotMatch");
    await control(fakes.s3, "clock", { advanceMs: 61_000 });
    expect(await xmlCode(await fetch(url))).toBe("403 AccessDenied");
    await control(fakes.s3, "clock", { reset: true });
  });

  it("of a presigned PUT bind type and length, and once", async () => {
    const url = await getSignedUrl(
      presigner,
      new PutObjectCommand({
        Bucket,
        Key: "once.png",
        ContentType: "image/png",
        ContentLength: 4,
        IfNoneMatch: "*",
      }),
      {
        signableHeaders: new Set(["host", "content-type", "content-length", "if-none-match"]),
      },
    );
    const send = (body: string, headers = {}) =>
      fetch(url, {
        method: "PUT",
        body,
        headers: { "content-type": "image/png", "if-none-match": "*", ...headers },
      });
    expect(await xmlCode(await send("longer"))).toBe("403 SignatureDoesNotMatch");
    expect(await xmlCode(await send("four", { "content-type": "text/html" }))).toBe(
      "403 SignatureDoesNotMatch",
    );
    const done = await send("four");
    expect(done.status).toBe(200);
    expect(done.headers.get("etag")).toBe(`"${createHash("md5").update("four").digest("hex")}"`);
    expect(await xmlCode(await send("four"))).toBe("412 PreconditionFailed");
  });

  it("that lack a header of ours are refused, so that nobody adds metadata to a signed address", async () => {
    const url = await getSignedUrl(presigner, new PutObjectCommand({ Bucket, Key: "extra" }));
    expect(
      await xmlCode(await fetch(url, { method: "PUT", body: "x", headers: { "x-amz-meta-a": "1" } })),
    ).toBe("403 AccessDenied");
  });
});

describe("browsers", () => {
  it("may send what they have a signature for, and see the ETag", async () => {
    const origin = "http://127.0.0.1:3000";
    const preflight = await fetch(`${fakes.s3.url}/${Bucket}/any`, {
      method: "OPTIONS",
      headers: {
        origin,
        "access-control-request-method": "PUT",
        "access-control-request-headers": "content-type,if-none-match",
      },
    });
    expect(preflight.status).toBe(200);
    expect(preflight.headers.get("access-control-allow-origin")).toBe(origin);
    expect(preflight.headers.get("access-control-allow-methods")).toContain("PUT");
    expect(preflight.headers.get("access-control-allow-headers")).toBe("content-type,if-none-match");
    const refused = await fetch(`${fakes.s3.url}/${Bucket}/any`, { headers: { origin } });
    expect(refused.status).toBe(403);
    expect(refused.headers.get("access-control-allow-origin")).toBe(origin);
    expect(refused.headers.get("access-control-expose-headers")).toContain("ETag");
  });
});

describe("multipart uploads", () => {
  it("join presigned parts, list what has arrived, and have the MD5 of the MD5s as ETag", async () => {
    const parts = [randomBytes(5 * MIB), randomBytes(5 * MIB), randomBytes(1000)];
    const Key = "large.tiff";
    const { UploadId } = await s3.send(
      new CreateMultipartUploadCommand({ Bucket, Key, ContentType: "image/tiff" }),
    );
    const sent: { PartNumber: number; ETag: string }[] = [];
    for (const [index, body] of parts.entries()) {
      const url = await getSignedUrl(
        presigner,
        new UploadPartCommand({ Bucket, Key, UploadId, PartNumber: index + 1 }),
      );
      const answer = await fetch(url, { method: "PUT", body: new Uint8Array(body) });
      sent.push({ PartNumber: index + 1, ETag: answer.headers.get("etag") ?? "" });
    }
    const listed = await s3.send(new ListPartsCommand({ Bucket, Key, UploadId, MaxParts: 2 }));
    expect(listed).toMatchObject({ IsTruncated: true, NextPartNumberMarker: "2" });
    expect(listed.Parts?.map(({ PartNumber, ETag, Size }) => ({ PartNumber, ETag, Size }))).toEqual(
      sent.slice(0, 2).map((part) => ({ ...part, Size: 5 * MIB })),
    );
    expect((await s3.send(new ListMultipartUploadsCommand({ Bucket }))).Uploads).toMatchObject([
      { Key, UploadId },
    ]);
    const complete = (Parts: typeof sent) =>
      s3.send(new CompleteMultipartUploadCommand({ Bucket, Key, UploadId, MultipartUpload: { Parts } }));
    expect(await codeOf(complete([...sent].reverse()))).toBe("400 InvalidPartOrder");
    expect(await codeOf(complete([...sent, { PartNumber: 9, ETag: '"none"' }]))).toBe("400 InvalidPart");
    const { ETag } = await complete(sent);
    const md5 = (bytes: Buffer) => createHash("md5").update(bytes).digest();
    expect(ETag).toBe(`"${md5(Buffer.concat(parts.map(md5))).toString("hex")}-3"`);
    const found = await read(Key);
    expect(found.bytes.equals(Buffer.concat(parts))).toBe(true);
    expect(found.ContentType).toBe("image/tiff");
    expect(await codeOf(s3.send(new ListPartsCommand({ Bucket, Key, UploadId })))).toBe("404 NoSuchUpload");
  });

  it("refuse a small part that is not the last, and forget everything when aborted", async () => {
    const before = filesKept();
    const Key = "small";
    const { UploadId } = await s3.send(new CreateMultipartUploadCommand({ Bucket, Key }));
    const one = await s3.send(new UploadPartCommand({ Bucket, Key, UploadId, PartNumber: 1, Body: "a" }));
    const two = await s3.send(new UploadPartCommand({ Bucket, Key, UploadId, PartNumber: 2, Body: "b" }));
    const Parts = [one, two].map(({ ETag }, index) => ({ ETag, PartNumber: index + 1 }));
    expect(
      await codeOf(
        s3.send(new CompleteMultipartUploadCommand({ Bucket, Key, UploadId, MultipartUpload: { Parts } })),
      ),
    ).toBe("400 EntityTooSmall");
    await s3.send(new AbortMultipartUploadCommand({ Bucket, Key, UploadId }));
    expect(
      await codeOf(s3.send(new UploadPartCommand({ Bucket, Key, UploadId, PartNumber: 3, Body: "c" }))),
    ).toBe("404 NoSuchUpload");
    expect(filesKept()).toBe(before);
  });

  it("carry a stream of unknown length through lib-storage", async () => {
    const body = randomBytes(12 * MIB);
    await new Upload({
      client: s3,
      params: {
        Bucket,
        Key: "unknown",
        Body: Readable.from([body.subarray(0, 7 * MIB), body.subarray(7 * MIB)]),
      },
    }).done();
    expect((await read("unknown")).bytes.equals(body)).toBe(true);
  });
});

describe("listing", () => {
  it("pages through keys in the order of their bytes, and folds common prefixes", async () => {
    const Other = "listing";
    await s3.send(new CreateBucketCommand({ Bucket: Other }));
    const keys = ["a.txt", "b/1", "b/2", "b/c/3", "c d", "é", "z", "日"];
    for (const Key of [...keys].reverse())
      await s3.send(new PutObjectCommand({ Bucket: Other, Key, Body: "x" }));
    const found: string[] = [];
    for await (const page of paginateListObjectsV2({ client: s3, pageSize: 3 }, { Bucket: Other }))
      found.push(...(page.Contents ?? []).map(({ Key = "" }) => Key));
    expect(found).toEqual([...keys].sort((x, y) => Buffer.compare(Buffer.from(x), Buffer.from(y))));
    const folded = await s3.send(new ListObjectsV2Command({ Bucket: Other, Delimiter: "/", MaxKeys: 2 }));
    expect(folded).toMatchObject({ IsTruncated: true, KeyCount: 2, CommonPrefixes: [{ Prefix: "b/" }] });
    const rest = await s3.send(
      new ListObjectsV2Command({
        Bucket: Other,
        Delimiter: "/",
        ContinuationToken: folded.NextContinuationToken,
      }),
    );
    expect(rest.Contents?.map(({ Key }) => Key)).toEqual(["c d", "z", "é", "日"]);
    const inside = await s3.send(
      new ListObjectsV2Command({ Bucket: Other, Prefix: "b/", Delimiter: "/", StartAfter: "b/1" }),
    );
    expect(inside.Contents?.map(({ Key }) => Key)).toEqual(["b/2"]);
    expect(inside.CommonPrefixes).toEqual([{ Prefix: "b/c/" }]);
    await s3.send(
      new DeleteObjectsCommand({ Bucket: Other, Delete: { Objects: keys.map((Key) => ({ Key })) } }),
    );
    expect((await s3.send(new ListObjectsV2Command({ Bucket: Other }))).KeyCount).toBe(0);
  });

  it("knows no bucket that was not made", async () => {
    expect(await codeOf(s3.send(new ListObjectsV2Command({ Bucket: "absent" })))).toBe("404 NoSuchBucket");
    expect(await codeOf(s3.send(new HeadBucketCommand({ Bucket: "absent" })))).toContain("404");
  });
});

describe("faults", () => {
  it("make the service fail, slow or drop as it is told", async () => {
    await put("fault", "x");
    await control(fakes.s3, "fault", {
      match: `GET /${Bucket}/fault`,
      action: "status",
      status: 503,
      times: 1,
    });
    const once = new S3Client({
      ...s3ConfigOf(fakes),
      forcePathStyle: true,
      credentials: s3ConfigOf(fakes),
      maxAttempts: 1,
    });
    expect(await codeOf(once.send(new GetObjectCommand({ Bucket, Key: "fault" })))).toBe("503 SlowDown");
    expect((await read("fault")).bytes.toString()).toBe("x");
  });
});

it("keeps objects and unfinished uploads over a restart", async () => {
  await put("kept", "still here", { ContentType: "text/plain" });
  const { UploadId } = await s3.send(new CreateMultipartUploadCommand({ Bucket, Key: "later" }));
  const { ETag } = await s3.send(
    new UploadPartCommand({ Bucket, Key: "later", UploadId, PartNumber: 1, Body: "part" }),
  );
  fakes = await fakes.restart();
  expect((await read("kept")).bytes.toString()).toBe("still here");
  await s3.send(
    new CompleteMultipartUploadCommand({
      Bucket,
      Key: "later",
      UploadId,
      MultipartUpload: { Parts: [{ PartNumber: 1, ETag }] },
    }),
  );
  expect((await read("later")).bytes.toString()).toBe("part");
});
