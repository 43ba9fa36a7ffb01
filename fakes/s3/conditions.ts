import { S3Error } from "./errors";

const bare = (tag: string): string => tag.trim().replace(/^W\//, "").replaceAll('"', "");
const names = (list: string, etag: string): boolean =>
  list.split(",").some((tag) => tag.trim() === "*" || bare(tag) === bare(etag));

/** RFC 9110, section 13.2.2, in its order: true when the answer is 304. Throws PreconditionFailed. */
export function isNotModified(
  headers: Record<string, string>,
  { etag, modifiedMs }: { etag: string; modifiedMs: number },
): boolean {
  const seconds = Math.floor(modifiedMs / 1000) * 1000;
  const failed = (which: string) =>
    new S3Error(
      "PreconditionFailed",
      `At least one of the pre-conditions you specified did not hold: ${which}`,
    );
  const {
    "if-match": match,
    "if-none-match": noneMatch,
    "if-modified-since": since,
    "if-unmodified-since": until,
  } = headers;
  if (match !== undefined) {
    if (!names(match, etag)) throw failed("If-Match");
  } else if (until !== undefined && seconds > Date.parse(until)) throw failed("If-Unmodified-Since");
  if (noneMatch !== undefined) return names(noneMatch, etag);
  return since !== undefined && seconds <= Date.parse(since);
}

/** What a PUT may ask for: `If-None-Match: *` for a new key only, `If-Match` for a known version. */
export function requireWritable(
  headers: Record<string, string>,
  present: { etag: string } | undefined,
): void {
  if (headers["if-none-match"] === "*" && present) {
    throw new S3Error(
      "PreconditionFailed",
      "At least one of the pre-conditions you specified did not hold: If-None-Match",
    );
  }
  const match = headers["if-match"];
  if (match === undefined) return;
  if (!present) throw new S3Error("NoSuchKey", "The specified key does not exist.");
  if (!names(match, present.etag))
    throw new S3Error(
      "PreconditionFailed",
      "At least one of the pre-conditions you specified did not hold: If-Match",
    );
}

/** The first and last byte of a `Range` header; null for none, for several, or for one that is not in bytes. */
export function readRange(
  header: string | undefined,
  byteSize: number,
): { start: number; end: number } | null {
  const [, from = "", to = ""] = /^bytes=(\d*)-(\d*)$/.exec(header ?? "") ?? [];
  if (from === "" && to === "") return null;
  const start = from === "" ? Math.max(0, byteSize - Number(to)) : Number(from);
  const end = from === "" || to === "" ? byteSize - 1 : Math.min(Number(to), byteSize - 1);
  if (from !== "" && to !== "" && Number(from) > Number(to)) return null; // not a valid range: ignored
  if (start >= byteSize || (from === "" && Number(to) === 0)) {
    throw new S3Error("InvalidRange", "The requested range is not satisfiable", {
      "content-range": `bytes */${byteSize}`,
    });
  }
  return { start, end };
}
