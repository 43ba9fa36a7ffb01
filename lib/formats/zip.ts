import { Readable } from "node:stream";
import yazl from "yazl";
import type { OutputFile } from "./dataset";

/**
 * Packs files as one zip, as a stream. The time of every entry is the first that zip can hold and the mode is fixed, so
 * the same files give the same bytes on every machine and in every time zone. Entries keep the order given;
 * pictures, which are compressed already, are stored as they are.
 */
export function zipStream(files: Iterable<OutputFile>): Readable {
  const zip = new yazl.ZipFile();
  // Zip keeps local time, so the local first of January 1980 is the same bytes everywhere.
  const mtime = new Date(1980, 0, 1);
  for (const { path, bytes } of files) {
    const compress = !/\.(png|jpe?g|webp|avif|gif|zip)$/i.test(path);
    zip.addBuffer(Buffer.from(bytes.buffer, bytes.byteOffset, bytes.byteLength), path, {
      mtime,
      mode: 0o100644,
      compress,
      forceDosTimestamp: true,
    });
  }
  zip.end();
  return Readable.from(zip.outputStream);
}

/** The same, gathered in memory. */
export async function zipBytes(files: Iterable<OutputFile>): Promise<Uint8Array> {
  const chunks: Buffer[] = [];
  for await (const chunk of zipStream(files)) chunks.push(Buffer.from(chunk));
  return Buffer.concat(chunks);
}
