/** The statuses of the error codes that are used here (Amazon S3 API reference, "Error responses"). */
const STATUS = {
  AccessDenied: 403,
  AuthorizationHeaderMalformed: 400,
  BadDigest: 400,
  BucketAlreadyOwnedByYou: 409,
  BucketNotEmpty: 409,
  EntityTooLarge: 400,
  EntityTooSmall: 400,
  IncompleteBody: 400,
  InvalidAccessKeyId: 403,
  InvalidArgument: 400,
  InvalidBucketName: 400,
  InvalidDigest: 400,
  InvalidPart: 400,
  InvalidPartOrder: 400,
  InvalidRange: 416,
  InvalidRequest: 400,
  KeyTooLongError: 400,
  MalformedPOSTRequest: 400,
  MalformedXML: 400,
  MethodNotAllowed: 405,
  MissingContentLength: 411,
  NoSuchBucket: 404,
  NoSuchKey: 404,
  NoSuchUpload: 404,
  NotImplemented: 501,
  PreconditionFailed: 412,
  RequestTimeTooSkewed: 403,
  SignatureDoesNotMatch: 403,
  SlowDown: 503,
  XAmzContentSHA256Mismatch: 400,
} as const;

export type S3Code = keyof typeof STATUS;

export class S3Error extends Error {
  readonly status: number;
  constructor(
    readonly code: S3Code,
    message: string,
    readonly headers: Record<string, string> = {},
  ) {
    super(message);
    this.status = STATUS[code];
  }
}
