import { S3Client } from "@aws-sdk/client-s3";

export type S3Config = { endpoint: string; region: string; accessKeyId: string; secretAccessKey: string };

function configOf({ endpoint, region, accessKeyId, secretAccessKey }: S3Config) {
  return { endpoint, region, forcePathStyle: true, credentials: { accessKeyId, secretAccessKey } };
}

/** A client for objects that this process sends and reads itself. The caller keeps it and destroys it. */
export function createS3Client(config: S3Config): S3Client {
  return new S3Client(configOf(config));
}

/**
 * A client that only signs addresses for a browser. It adds no checksum of its own: the default one would be of
 * the empty body at signing time, and would refuse every real body with BadDigest.
 */
export function createS3Presigner(config: S3Config): S3Client {
  return new S3Client({ ...configOf(config), requestChecksumCalculation: "WHEN_REQUIRED" });
}
