import { randomBytes } from "node:crypto";
import {
  closeSync,
  createReadStream,
  createWriteStream,
  mkdirSync,
  openSync,
  renameSync,
  rmSync,
  writeSync,
} from "node:fs";
import path from "node:path";
import { pipeline } from "node:stream/promises";
import Database from "better-sqlite3";
import { S3Error } from "./errors";

/** What is known of an object beside its bytes. `headers` are those that a GET gives back. */
export type ObjectRow = {
  bucket: string;
  key: string;
  file: string;
  byteSize: number;
  etag: string;
  modifiedMs: number;
  headers: Record<string, string>;
};

export type PartRow = {
  number: number;
  file: string;
  byteSize: number;
  etag: string;
  modifiedMs: number;
  checksum: string | null;
};
export type UploadRow = {
  id: string;
  bucket: string;
  key: string;
  headers: Record<string, string>;
  startedMs: number;
};

/** Sorts after every key: the last code point of Unicode. */
export const LAST = "\u{10FFFF}";

type Stored<T extends { headers: unknown }> = Omit<T, "headers"> & { headers: string };

const unpack = <T extends { headers: Record<string, string> }>(row: Stored<T>): T =>
  ({ ...row, headers: JSON.parse(row.headers) }) as unknown as T;

/** Bytes as files, everything else in one SQLite index whose keys sort by UTF-8 bytes as S3's do. */
export class ObjectStore {
  private readonly db: Database.Database;
  private readonly data: string;

  constructor(folder: string) {
    this.data = path.join(folder, "data");
    mkdirSync(this.data, { recursive: true });
    this.db = new Database(path.join(folder, "index.sqlite"));
    this.db.pragma("journal_mode = WAL");
    this.db.pragma("synchronous = NORMAL");
    this.db.exec(`
      create table if not exists buckets (name text primary key, createdMs integer not null);
      create table if not exists objects (bucket text not null, key text not null, file text not null, byteSize integer not null, etag text not null, modifiedMs integer not null, headers text not null, primary key (bucket, key)) without rowid;
      create table if not exists uploads (id text primary key, bucket text not null, key text not null, headers text not null, startedMs integer not null);
      create table if not exists parts (upload text not null, number integer not null, file text not null, byteSize integer not null, etag text not null, modifiedMs integer not null, checksum text, primary key (upload, number)) without rowid;
    `);
  }

  pathOf = (file: string): string => path.join(this.data, file.slice(0, 2), file);

  /** A temporary file that is given a name only when all of its bytes were found to be right. */
  openDraft(): Draft {
    const file = randomBytes(16).toString("hex");
    mkdirSync(path.dirname(this.pathOf(file)), { recursive: true });
    return new Draft(file, this.pathOf(file));
  }

  createBucket(name: string, nowMs: number): void {
    this.db.prepare("insert or ignore into buckets values (?, ?)").run(name, nowMs);
  }

  listBuckets(): { name: string; createdMs: number }[] {
    return this.db
      .prepare<[], { name: string; createdMs: number }>("select * from buckets order by name")
      .all();
  }

  requireBucket(name: string): void {
    if (!this.db.prepare("select 1 from buckets where name = ?").get(name))
      throw new S3Error("NoSuchBucket", "The specified bucket does not exist");
  }

  deleteBucket(name: string): void {
    if (this.db.prepare("select 1 from objects where bucket = ? limit 1").get(name)) {
      throw new S3Error("BucketNotEmpty", "The bucket you tried to delete is not empty");
    }
    this.db.prepare("delete from buckets where name = ?").run(name);
  }

  find(bucket: string, key: string): ObjectRow | undefined {
    const row = this.db
      .prepare<[string, string], Stored<ObjectRow>>("select * from objects where bucket = ? and key = ?")
      .get(bucket, key);
    return row && unpack<ObjectRow>(row);
  }

  get(bucket: string, key: string): ObjectRow {
    const row = this.find(bucket, key);
    if (!row) throw new S3Error("NoSuchKey", "The specified key does not exist.");
    return row;
  }

  put(row: ObjectRow): void {
    const before = this.find(row.bucket, row.key);
    this.db
      .prepare(
        "insert or replace into objects values (@bucket, @key, @file, @byteSize, @etag, @modifiedMs, @headers)",
      )
      .run({ ...row, headers: JSON.stringify(row.headers) });
    if (before) this.discard(before.file);
  }

  delete(bucket: string, key: string): void {
    const row = this.find(bucket, key);
    if (!row) return;
    this.db.prepare("delete from objects where bucket = ? and key = ?").run(bucket, key);
    this.discard(row.file);
  }

  /** Objects in key order, from `from` on (after it where `isAfter`), at most `limit`. */
  scan(bucket: string, prefix: string, from: string, isAfter: boolean, limit: number): ObjectRow[] {
    const sql = `select * from objects where bucket = ? and key ${isAfter ? ">" : ">="} ? and key >= ? and key < ? order by key limit ?`;
    return this.db
      .prepare<[string, string, string, string, number], Stored<ObjectRow>>(sql)
      .all(bucket, from, prefix, prefix + LAST, limit)
      .map((row) => unpack<ObjectRow>(row));
  }

  startUpload(row: UploadRow): void {
    this.db
      .prepare("insert into uploads values (@id, @bucket, @key, @headers, @startedMs)")
      .run({ ...row, headers: JSON.stringify(row.headers) });
  }

  getUpload(id: string, bucket: string, key: string): UploadRow {
    const row = this.db
      .prepare<[string, string, string], Stored<UploadRow>>(
        "select * from uploads where id = ? and bucket = ? and key = ?",
      )
      .get(id, bucket, key);
    if (!row)
      throw new S3Error(
        "NoSuchUpload",
        "The specified upload does not exist. It may have been aborted or completed.",
      );
    return unpack<UploadRow>(row);
  }

  listUploads(bucket: string, prefix: string): UploadRow[] {
    return this.db
      .prepare<[string, string, string], Stored<UploadRow>>(
        "select * from uploads where bucket = ? and substr(key, 1, length(?)) = ? order by key, startedMs",
      )
      .all(bucket, prefix, prefix)
      .map((row) => unpack<UploadRow>(row));
  }

  putPart(upload: string, part: PartRow): void {
    const before = this.db
      .prepare<[string, number], PartRow>("select * from parts where upload = ? and number = ?")
      .get(upload, part.number);
    this.db
      .prepare(
        "insert or replace into parts values (@upload, @number, @file, @byteSize, @etag, @modifiedMs, @checksum)",
      )
      .run({ upload, ...part });
    if (before) this.discard(before.file);
  }

  listParts(upload: string): PartRow[] {
    return this.db
      .prepare<[string], PartRow>("select * from parts where upload = ? order by number")
      .all(upload);
  }

  endUpload(upload: string): void {
    const parts = this.listParts(upload);
    this.db.prepare("delete from parts where upload = ?").run(upload);
    this.db.prepare("delete from uploads where id = ?").run(upload);
    for (const part of parts) this.discard(part.file);
  }

  /** One file out of several, in order. The sources stay. */
  async join(files: string[]): Promise<string> {
    const draft = this.openDraft();
    draft.close();
    for (const file of files)
      await pipeline(createReadStream(this.pathOf(file)), createWriteStream(draft.temporary, { flags: "a" }));
    return draft.keep();
  }

  private discard(file: string): void {
    rmSync(this.pathOf(file), { force: true });
  }

  reset(): void {
    this.db.exec("delete from parts; delete from uploads; delete from objects; delete from buckets;");
    rmSync(this.data, { recursive: true, force: true });
    mkdirSync(this.data, { recursive: true });
  }

  close(): void {
    this.db.close();
  }
}

/** Bytes on their way in. Synchronous writes go to the page cache and keep one piece in memory at a time. */
export class Draft {
  readonly temporary: string;
  private descriptor: number | null;

  constructor(
    private readonly file: string,
    private readonly final: string,
  ) {
    this.temporary = `${final}.part`;
    this.descriptor = openSync(this.temporary, "w");
  }

  write = (bytes: Uint8Array): void => {
    if (this.descriptor === null) throw new Error("the draft is closed");
    for (let at = 0; at < bytes.length;) at += writeSync(this.descriptor, bytes, at);
  };

  close(): void {
    if (this.descriptor !== null) closeSync(this.descriptor);
    this.descriptor = null;
  }

  /** Gives the draft its name and returns it. */
  keep(): string {
    this.close();
    renameSync(this.temporary, this.final);
    return this.file;
  }

  drop(): void {
    this.close();
    rmSync(this.temporary, { force: true });
  }
}
