import { CreateBucketCommand, GetObjectCommand, type S3Client } from "@aws-sdk/client-s3";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { hmacHex, signingKey } from "@/fakes/s3/sigv4";
import { S3_KEYS, clientsOf, startTestFakes, type TestFakes } from "@/tests/support/fakes";

const Bucket = "forms";
let fakes: TestFakes;
let s3: S3Client;
beforeAll(async () => {
  fakes = await startTestFakes();
  ({ s3 } = clientsOf(fakes));
  await s3.send(new CreateBucketCommand({ Bucket }));
});
afterAll(() => fakes.remove());

/** The fields of a signed form, as Amazon's "Browser-based uploads using POST" lays them out. */
function signedFields(conditions: unknown[], fields: Record<string, string>): Record<string, string> {
  const time = new Date().toISOString().replace(/[-:]|\.\d{3}/g, "");
  const scope = `${time.slice(0, 8)}/${S3_KEYS.region}/s3/aws4_request`;
  const auth = {
    "x-amz-algorithm": "AWS4-HMAC-SHA256",
    "x-amz-credential": `${S3_KEYS.accessKeyId}/${scope}`,
    "x-amz-date": time,
  };
  const document = {
    expiration: new Date(Date.now() + 60_000).toISOString(),
    conditions: [
      ...conditions,
      { bucket: Bucket },
      ...Object.entries(auth).map(([name, value]) => ({ [name]: value })),
    ],
  };
  const policy = Buffer.from(JSON.stringify(document)).toString("base64");
  return {
    ...fields,
    ...auth,
    policy,
    "x-amz-signature": hmacHex(signingKey(S3_KEYS.secretAccessKey, scope), policy),
  };
}

async function post(fields: Record<string, string>, bytes: string, filename = "beach.png"): Promise<string> {
  const form = new FormData();
  for (const [name, value] of Object.entries(fields)) form.append(name, value);
  form.append("file", new Blob([bytes], { type: "image/png" }), filename);
  const answer = await fetch(`${fakes.s3.url}/${Bucket}`, { method: "POST", body: form });
  return `${answer.status} ${/<Code>(.*?)<\/Code>/.exec(await answer.text())?.[1] ?? ""}`.trim();
}

describe("a form upload", () => {
  const conditions = [
    ["starts-with", "$key", "in/"],
    ["content-length-range", 2, 10],
    ["starts-with", "$Content-Type", "image/"],
  ];
  const fields = { key: "in/${filename}", "Content-Type": "image/png" };

  it("stores the file under the name that it has", async () => {
    const tricky = "a\r\n--b\r\n"; // looks like a boundary and is none
    expect(await post(signedFields(conditions, fields), tricky)).toBe("204");
    const found = await s3.send(new GetObjectCommand({ Bucket, Key: "in/beach.png" }));
    expect(await found.Body?.transformToString()).toBe(tricky);
    expect(found.ContentType).toBe("image/png");
  });

  it.each([
    ["too large", conditions, fields, "12345678901", "400 EntityTooLarge"],
    ["too small", conditions, fields, "1", "400 EntityTooSmall"],
    ["elsewhere", conditions, { ...fields, key: "out/x" }, "1234", "403 AccessDenied"],
    ["another type", conditions, { ...fields, "Content-Type": "text/html" }, "1234", "403 AccessDenied"],
    ["a field that nobody signed", conditions, { ...fields, acl: "public-read" }, "1234", "403 AccessDenied"],
  ])("is refused when it is %s", async (_, allowed, given, bytes, expected) => {
    expect(await post(signedFields(allowed, given), bytes, "refused.png")).toBe(expected);
    await expect(s3.send(new GetObjectCommand({ Bucket, Key: "in/refused.png" }))).rejects.toThrow(
      "does not exist",
    );
  });

  it("is refused with a forged or missing signature", async () => {
    const signed = signedFields(conditions, fields);
    expect(await post({ ...signed, "x-amz-signature": "0".repeat(64) }, "1234")).toBe(
      "403 SignatureDoesNotMatch",
    );
    expect(await post(fields, "1234")).toBe("403 AccessDenied");
  });
});
