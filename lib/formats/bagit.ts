import { createHash } from "node:crypto";
import type { OutputFile } from "./dataset";
import { FormatError } from "./dataset";

/** A file of the payload whose contents lie elsewhere; the path is relative to the payload. */
export type PayloadEntry = { readonly path: string; readonly sha256: string; readonly sizeBytes: number };

const encoder = new TextEncoder();

/** SHA-256 as lower-case hexadecimal. */
export function sha256Of(bytes: Uint8Array): string {
  return createHash("sha256").update(bytes).digest("hex");
}

/** The entry of a file that is at hand. */
export function payloadEntry({ path, bytes }: OutputFile): PayloadEntry {
  return { path, sha256: sha256Of(bytes), sizeBytes: bytes.length };
}

/**
 * The files that make a folder of payload a bag (RFC 8493, BagIt 1.0): declaration, bag-info, SHA-256 manifest of the
 * payload and of these files themselves. The payload goes under data/ beside them. Entries are ordered by path, so
 * the same payload gives the same bytes. Throws FormatError for a path that leaves the bag or occurs twice.
 */
export function bagTagFiles(
  payload: readonly PayloadEntry[],
  info: Readonly<Record<string, string>>,
): OutputFile[] {
  const sorted = payload.toSorted((a, b) => (a.path < b.path ? -1 : 1));
  for (const [i, { path }] of sorted.entries()) {
    if (
      path.startsWith("/") ||
      path.split("/").some((part) => part === "" || part === "." || part === "..")
    ) {
      throw new FormatError(path, "is no relative path inside a bag");
    }
    if (path === sorted[i - 1]?.path) throw new FormatError(path, "occurs twice in the bag");
  }
  const octets = sorted.reduce((sum, { sizeBytes }) => sum + sizeBytes, 0);
  const tags = [
    file("bagit.txt", "BagIt-Version: 1.0\nTag-File-Character-Encoding: UTF-8\n"),
    file("bag-info.txt", infoText({ ...info, "Payload-Oxum": `${octets}.${sorted.length}` })),
    file(
      "manifest-sha256.txt",
      sorted.map(({ path, sha256 }) => `${sha256}  data/${encoded(path)}\n`).join(""),
    ),
  ];
  const manifest = tags.map((tag) => `${sha256Of(tag.bytes)}  ${tag.path}\n`).join("");
  return [...tags, file("tagmanifest-sha256.txt", manifest)];
}

/** A whole bag in memory: the tag files and the payload under data/. */
export function bagOf(payload: readonly OutputFile[], info: Readonly<Record<string, string>>): OutputFile[] {
  const tags = bagTagFiles(payload.map(payloadEntry), info);
  const data = payload.map(({ path, bytes }) => ({ path: `data/${path}`, bytes }));
  return [...tags, ...data.toSorted((a, b) => (a.path < b.path ? -1 : 1))];
}

function file(path: string, text: string): OutputFile {
  return { path, bytes: encoder.encode(text) };
}

/** Only these three are percent-encoded in a manifest (RFC 8493, section 2.1.3). */
function encoded(path: string): string {
  return path.replaceAll("%", "%25").replaceAll("\r", "%0D").replaceAll("\n", "%0A");
}

/** A label a line; line breaks inside a value become spaces. */
function infoText(info: Readonly<Record<string, string>>): string {
  return Object.entries(info)
    .map(([label, value]) => `${label}: ${value.replaceAll(/\s*[\r\n]+\s*/g, " ")}\n`)
    .join("");
}
