import { Readable } from "node:stream";
import yazl from "yazl";
import type { OutputFile } from "./dataset";

/** A file that is opened only when its turn comes, so that a zip larger than memory can be made. */
export type LazyFile = {
  readonly path: string;
  readonly sizeBytes: number;
  readonly open: () => Promise<Readable>;
};

/**
 * Packs files as one zip, as a stream. The time of every entry is the first that zip can hold and the mode is fixed, so
 * the same files give the same bytes on every machine and in every time zone. Entries keep the order given;
 * pictures, which are compressed already, are stored as they are.
 */
export function zipStream(files: Iterable<OutputFile | LazyFile>): Readable {
  const zip = new yazl.ZipFile();
  // Zip keeps local time, so the local first of January 1980 is the same bytes everywhere.
  const mtime = new Date(1980, 0, 1);
  for (const file of files) {
    const compress = !/\.(png|jpe?g|webp|avif|gif|zip)$/i.test(file.path);
    const options = { mtime, mode: 0o100644, compress, forceDosTimestamp: true };
    if ("bytes" in file) {
      const { buffer, byteOffset, byteLength } = file.bytes;
      zip.addBuffer(Buffer.from(buffer, byteOffset, byteLength), file.path, options);
    } else {
      zip.addReadStreamLazy(file.path, { ...options, size: file.sizeBytes }, (done) => {
        file.open().then(
          (stream) => done(null, stream),
          (error: unknown) => zip.emit("error", error),
        );
      });
    }
  }
  zip.end();
  const packed = Readable.from(zip.outputStream);
  zip.on("error", (error: Error) => packed.destroy(error));
  return packed;
}

/** The same, gathered in memory. */
export async function zipBytes(files: Iterable<OutputFile>): Promise<Uint8Array> {
  const chunks: Buffer[] = [];
  for await (const chunk of zipStream(files)) chunks.push(Buffer.from(chunk));
  return Buffer.concat(chunks);
}
