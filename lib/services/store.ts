import { Readable } from "node:stream";
import {
  AbortMultipartUploadCommand,
  CompleteMultipartUploadCommand,
  CreateBucketCommand,
  CreateMultipartUploadCommand,
  DeleteObjectCommand,
  GetObjectCommand,
  HeadBucketCommand,
  HeadObjectCommand,
  ListPartsCommand,
  NotFound,
  PutObjectCommand,
  UploadPartCommand,
  type S3Client,
} from "@aws-sdk/client-s3";
import { Upload } from "@aws-sdk/lib-storage";
import { getSignedUrl } from "@aws-sdk/s3-request-presigner";
import { env } from "@/lib/env";
import { createS3Client, createS3Presigner, type S3Config } from "./s3";

export type PartTag = { number: number; etag: string };

const PRESIGNED_SECONDS = 3600;

let client: S3Client | undefined;
let presigner: S3Client | undefined;

function config(): S3Config {
  const { S3_ENDPOINT, S3_REGION, S3_ACCESS_KEY_ID, S3_SECRET_ACCESS_KEY } = env();
  return {
    endpoint: S3_ENDPOINT,
    region: S3_REGION,
    accessKeyId: S3_ACCESS_KEY_ID,
    secretAccessKey: S3_SECRET_ACCESS_KEY,
  };
}

const s3 = (): S3Client => (client ??= createS3Client(config()));
const signer = (): S3Client => (presigner ??= createS3Presigner(config()));

const Bucket = () => env().S3_BUCKET;

/** Makes the bucket if it is not there yet. */
export async function ensureBucket(): Promise<void> {
  try {
    await s3().send(new HeadBucketCommand({ Bucket: Bucket() }));
  } catch {
    await s3().send(new CreateBucketCommand({ Bucket: Bucket() }));
  }
}

/**
 * An address to which the browser may PUT exactly these many bytes of this type, once: another length is
 * refused with 403, a second PUT with 412. `headers` must be sent as given.
 */
export async function presignPut(key: string, byteSize: number, mediaType: string) {
  const command = new PutObjectCommand({
    Bucket: Bucket(),
    Key: key,
    ContentType: mediaType,
    ContentLength: byteSize,
    IfNoneMatch: "*",
  });
  const url = await getSignedUrl(signer(), command, {
    expiresIn: PRESIGNED_SECONDS,
    signableHeaders: new Set(["host", "content-type", "content-length", "if-none-match"]),
  });
  return { url, headers: { "content-type": mediaType, "if-none-match": "*" } };
}

export async function startMultipart(key: string, mediaType: string): Promise<string> {
  const answer = await s3().send(
    new CreateMultipartUploadCommand({ Bucket: Bucket(), Key: key, ContentType: mediaType }),
  );
  if (!answer.UploadId) throw new Error("the object store gave no upload id");
  return answer.UploadId;
}

export function presignPart(key: string, uploadId: string, number: number): Promise<string> {
  const command = new UploadPartCommand({
    Bucket: Bucket(),
    Key: key,
    UploadId: uploadId,
    PartNumber: number,
  });
  return getSignedUrl(signer(), command, { expiresIn: PRESIGNED_SECONDS });
}

/** The parts that have arrived; null when the store no longer knows the upload. */
export async function listParts(key: string, uploadId: string): Promise<PartTag[] | null> {
  try {
    const answer = await s3().send(new ListPartsCommand({ Bucket: Bucket(), Key: key, UploadId: uploadId }));
    return (answer.Parts ?? []).map((part) => ({ number: part.PartNumber ?? 0, etag: part.ETag ?? "" }));
  } catch (error) {
    if (error instanceof Error && error.name === "NoSuchUpload") return null;
    throw error;
  }
}

/**
 * Joins the parts of an upload. One that was joined before (an answer that was lost, a crash before it was
 * noted) is no failure: whether the object is there is for `findObjectSize` to say.
 */
export async function completeMultipart(key: string, uploadId: string, parts: PartTag[]): Promise<void> {
  const Parts = [...parts]
    .sort((a, b) => a.number - b.number)
    .map((p) => ({ PartNumber: p.number, ETag: p.etag }));
  const command = new CompleteMultipartUploadCommand({
    Bucket: Bucket(),
    Key: key,
    UploadId: uploadId,
    MultipartUpload: { Parts },
  });
  await s3()
    .send(command)
    .catch((error: unknown) => {
      if (!(error instanceof Error && error.name === "NoSuchUpload")) throw error;
    });
}

export async function abortMultipart(key: string, uploadId: string): Promise<void> {
  await s3()
    .send(new AbortMultipartUploadCommand({ Bucket: Bucket(), Key: key, UploadId: uploadId }))
    .catch(() => undefined);
}

/** Size in bytes, or null when there is no such object. */
export async function findObjectSize(key: string): Promise<number | null> {
  try {
    const answer = await s3().send(new HeadObjectCommand({ Bucket: Bucket(), Key: key }));
    return answer.ContentLength ?? 0;
  } catch (error) {
    if (error instanceof NotFound || (error instanceof Error && error.name === "NoSuchKey")) return null;
    throw error;
  }
}

export async function getObject(key: string): Promise<Buffer> {
  const answer = await s3().send(new GetObjectCommand({ Bucket: Bucket(), Key: key }));
  if (!answer.Body) throw new Error(`object ${key} has no body`);
  return Buffer.from(await answer.Body.transformToByteArray());
}

/** The object as a stream that is read as it arrives. */
export async function readObject(key: string): Promise<Readable> {
  const answer = await s3().send(new GetObjectCommand({ Bucket: Bucket(), Key: key }));
  if (!(answer.Body instanceof Readable)) throw new Error(`object ${key} has no body`);
  return answer.Body;
}

/** The object as a web stream with its length, for answering a request without holding it in memory. */
export async function streamObject(
  key: string,
): Promise<{ stream: ReadableStream; byteSize: number | undefined }> {
  const answer = await s3().send(new GetObjectCommand({ Bucket: Bucket(), Key: key }));
  if (!answer.Body) throw new Error(`object ${key} has no body`);
  return { stream: answer.Body.transformToWebStream(), byteSize: answer.ContentLength };
}

export async function putObject(key: string, body: Buffer, mediaType: string): Promise<void> {
  await s3().send(new PutObjectCommand({ Bucket: Bucket(), Key: key, Body: body, ContentType: mediaType }));
}

/** Stores a stream of unknown length. */
export async function putStream(key: string, body: Readable, mediaType: string): Promise<void> {
  await new Upload({
    client: s3(),
    params: { Bucket: Bucket(), Key: key, Body: body, ContentType: mediaType },
  }).done();
}

export async function deleteObject(key: string): Promise<void> {
  await s3().send(new DeleteObjectCommand({ Bucket: Bucket(), Key: key }));
}
