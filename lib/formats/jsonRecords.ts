import { closeSync, fstatSync, openSync, readSync } from "node:fs";
import { FormatError } from "./dataset";

/** Where a value of a JSON file lies. */
export type JsonRecord = {
  /** The key of the list it belongs to at the top of the file; "" where the file itself is a list. */
  readonly list: string;
  /** Place in that list, from 0. */
  readonly index: number;
  readonly start: number;
  readonly length: number;
  /** Parses it; only valid until the next record is asked for. */
  readonly parse: () => unknown;
};

const CHUNK_BYTES = 1 << 20;
/** A single record longer than this is not read. */
const RECORD_BYTES_MAX = 1 << 28;

/**
 * Walks a JSON file of any size and hands over each element of each list at its top ({"images": [..], ..}, or a list
 * itself), one after the other, with its place in the file. Other values at the top are checked and passed
 * over. Memory is that of the longest record. Throws FormatError, with the place, for what is not JSON.
 * `onProgress` hears of bytes read.
 */
export function* jsonRecords(
  path: string,
  onProgress?: (done: number, all: number) => void,
): Generator<JsonRecord> {
  const file = openSync(path, "r");
  try {
    yield* scan(new Bytes(file, onProgress));
  } finally {
    closeSync(file);
  }
}

/** Reads back one record by its place. */
export function readRecord(file: number, start: number, length: number): unknown {
  const bytes = Buffer.allocUnsafe(length);
  readSync(file, bytes, 0, length, start);
  return JSON.parse(bytes.toString("utf8"));
}

const QUOTE = 0x22;
const BACKSLASH = 0x5c;
const OPEN_LIST = 0x5b;
const CLOSE_LIST = 0x5d;
const OPEN_OBJECT = 0x7b;
const CLOSE_OBJECT = 0x7d;
const COMMA = 0x2c;
const COLON = 0x3a;

function* scan(bytes: Bytes): Generator<JsonRecord> {
  if (bytes.peekPast(0xef)) bytes.skipMark();
  const first = bytes.peek();
  if (first === OPEN_LIST) {
    yield* scanList(bytes, "");
  } else if (first === OPEN_OBJECT) {
    bytes.take();
    const seen = new Set<string>();
    for (let isFirst = true; ; isFirst = false) {
      const next = bytes.peek();
      if (next === CLOSE_OBJECT && isFirst) {
        bytes.take();
        break;
      }
      const key = bytes.parse(bytes.value("a key"), "a key");
      if (typeof key !== "string") throw new FormatError(`byte ${bytes.at}`, "expected a key in quotes");
      if (seen.has(key)) throw new FormatError(key, "occurs twice");
      seen.add(key);
      bytes.expect(COLON, ":");
      if (bytes.peek() === OPEN_LIST) yield* scanList(bytes, key);
      else bytes.parse(bytes.value(key), key);
      if (bytes.peek() === CLOSE_OBJECT) {
        bytes.take();
        break;
      }
      bytes.expect(COMMA, ",");
    }
  } else {
    throw new FormatError(
      "",
      first < 0 ? "the file is empty" : "the file is not JSON: it starts with neither { nor [",
    );
  }
  if (bytes.peek() >= 0)
    throw new FormatError(`byte ${bytes.at}`, "something follows the end of the JSON value");
}

function* scanList(bytes: Bytes, list: string): Generator<JsonRecord> {
  bytes.take();
  if (bytes.peek() === CLOSE_LIST) {
    bytes.take();
    return;
  }
  for (let index = 0; ; index++) {
    const record = `${list}[${index}]`;
    bytes.peek();
    const start = bytes.at;
    const text = bytes.value(record);
    yield { list, index, start, length: bytes.at - start, parse: () => bytes.parse(text, record) };
    if (bytes.peek() === CLOSE_LIST) break;
    bytes.expect(COMMA, ",");
  }
  bytes.take();
}

/** A cursor over a file that keeps one chunk, or the record that is being read. */
class Bytes {
  private chunk = Buffer.alloc(0);
  private place = 0;
  private chunkStart = 0;
  private readonly size: number;

  constructor(
    private readonly file: number,
    private readonly onProgress?: (done: number, all: number) => void,
  ) {
    this.size = fstatSync(file).size;
  }

  /** Place in the file. */
  get at(): number {
    return this.chunkStart + this.place;
  }

  /** Loads more, keeping what lies from `from` on in the chunk; false at the end of the file. */
  private more(from: number): boolean {
    const kept = this.chunk.length - from;
    const next = Buffer.allocUnsafe(kept + CHUNK_BYTES);
    this.chunk.copy(next, 0, from);
    const read = readSync(this.file, next, kept, CHUNK_BYTES, this.chunkStart + this.chunk.length);
    this.chunkStart += from;
    this.place -= from;
    this.chunk = next.subarray(0, kept + read);
    this.onProgress?.(Math.min(this.size, this.chunkStart + this.chunk.length), this.size);
    return read > 0;
  }

  /** The next byte that is no white space, without taking it; -1 at the end. */
  peek(): number {
    for (;;) {
      while (this.place < this.chunk.length) {
        const byte = this.chunk[this.place] ?? -1;
        if (byte !== 0x20 && byte !== 0x0a && byte !== 0x0d && byte !== 0x09) return byte;
        this.place++;
      }
      if (!this.more(this.place)) return -1;
    }
  }

  peekPast(byte: number): boolean {
    return this.peek() === byte;
  }

  /** Some editors put a byte order mark in front. */
  skipMark(): void {
    this.place += 3;
  }

  take(): void {
    this.place++;
  }

  expect(byte: number, name: string): void {
    const found = this.peek();
    if (found === byte) return this.take();
    throw new FormatError(`byte ${this.at}`, found < 0 ? "the file ends too early" : `expected "${name}"`);
  }

  /** Takes the text of one value: to the end of its brackets or string, or to the next separator. */
  value(record: string): Buffer {
    let start = this.place;
    let depth = 0;
    let inText = false;
    for (let i = start; ; i++) {
      if (i >= this.chunk.length) {
        if (i - start > RECORD_BYTES_MAX) throw new FormatError(record, "is too long to be read");
        const place = this.place;
        if (!this.more(start)) {
          // A bare number or word at the end of the file is complete; anything open is not.
          if (depth === 0 && !inText && i > start)
            return this.taken(start - (place - this.place), this.chunk.length);
          throw new FormatError(record, "the file ends inside this record");
        }
        i -= place - this.place;
        start -= place - this.place;
      }
      const byte = this.chunk[i] ?? 0;
      if (inText) {
        if (byte === BACKSLASH) i++;
        else if (byte === QUOTE) {
          inText = false;
          if (depth === 0) return this.taken(start, i + 1);
        }
      } else if (byte === QUOTE) inText = true;
      else if (byte === OPEN_LIST || byte === OPEN_OBJECT) depth++;
      else if (byte === CLOSE_LIST || byte === CLOSE_OBJECT) {
        if (depth === 0) return this.taken(start, i);
        depth--;
        if (depth === 0) return this.taken(start, i + 1);
      } else if (depth === 0 && (byte === COMMA || byte === COLON || byte <= 0x20))
        return this.taken(start, i);
    }
  }

  private taken(start: number, end: number): Buffer {
    this.place = end;
    return this.chunk.subarray(start, end);
  }

  parse(text: Buffer, record: string): unknown {
    try {
      return JSON.parse(text.toString("utf8"));
    } catch (cause) {
      throw new FormatError(record, "is not valid JSON", { cause });
    }
  }
}
