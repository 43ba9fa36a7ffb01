import { mkdirSync } from "node:fs";
import path from "node:path";
import Database from "better-sqlite3";

/**
 * Documents by id, held in memory and written to one SQLite file at `commit`, all of a request or nothing.
 * Insertion order is kept over a restart. WAL with synchronous NORMAL: what was committed survives the death of
 * the process, at whatever point it is killed.
 */
export class Documents {
  private readonly db: Database.Database;
  private readonly tables = new Map<string, { clear: () => void }>();
  private readonly dirty = new Map<string, { table: string; id: string; value: unknown }>();
  private readonly upsert: Database.Statement;
  private readonly remove: Database.Statement;

  /** `file` null keeps everything in memory, for tests. */
  constructor(file: string | null) {
    if (file) mkdirSync(path.dirname(file), { recursive: true });
    this.db = new Database(file ?? ":memory:");
    this.db.pragma("journal_mode = WAL");
    this.db.pragma("synchronous = NORMAL");
    this.db.exec(
      "create table if not exists documents (place integer primary key, kind text not null, id text not null, body text not null, unique (kind, id))",
    );
    this.upsert = this.db.prepare(
      "insert into documents (kind, id, body) values (?, ?, ?) on conflict (kind, id) do update set body = excluded.body",
    );
    this.remove = this.db.prepare("delete from documents where kind = ? and id = ?");
  }

  /** The documents of one kind. Only one caller may name a kind, so the type is that caller's. */
  table<T>(kind: string): Table<T> {
    const rows = new Map<string, T>();
    const stored = this.db.prepare<[string], { id: string; body: string }>(
      "select id, body from documents where kind = ? order by place",
    );
    for (const { id, body } of stored.iterate(kind)) rows.set(id, JSON.parse(body) as T);
    const table = new Table<T>(rows, (id, value) =>
      this.dirty.set(`${kind}\0${id}`, { table: kind, id, value }),
    );
    this.tables.set(kind, table);
    return table;
  }

  /** After `close` nothing is written: what was under way then is done again after a restart. */
  commit(): void {
    if (this.dirty.size === 0 || !this.db.open) return;
    const changes = [...this.dirty.values()];
    this.dirty.clear();
    this.db.transaction(() => {
      for (const { table, id, value } of changes) {
        if (value === undefined) this.remove.run(table, id);
        else this.upsert.run(table, id, JSON.stringify(value));
      }
    })();
  }

  /** Forgets everything. */
  reset(): void {
    this.dirty.clear();
    this.db.exec("delete from documents");
    for (const table of this.tables.values()) table.clear();
  }

  close(): void {
    this.commit();
    this.db.close();
  }
}

export class Table<T> {
  constructor(
    private readonly rows: Map<string, T>,
    private readonly mark: (id: string, value: T | undefined) => void,
  ) {}

  find(id: string): T | undefined {
    return this.rows.get(id);
  }

  /** Adds a row, or notes that it changed. */
  put(id: string, row: T): T {
    this.rows.set(id, row);
    this.mark(id, row);
    return row;
  }

  delete(id: string): void {
    if (this.rows.delete(id)) this.mark(id, undefined);
  }

  /** Oldest first. */
  all(): T[] {
    return [...this.rows.values()];
  }

  values(): IterableIterator<T> {
    return this.rows.values();
  }

  entries(): [string, T][] {
    return [...this.rows];
  }

  get size(): number {
    return this.rows.size;
  }

  clear(): void {
    this.rows.clear();
  }
}
