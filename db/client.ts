import { mkdirSync } from "node:fs";
import path from "node:path";
import Database from "better-sqlite3";
import { drizzle, type BetterSQLite3Database } from "drizzle-orm/better-sqlite3";
import { migrate } from "drizzle-orm/better-sqlite3/migrator";
import { env } from "@/lib/env";
import * as schema from "./schema";

export type Db = BetterSQLite3Database<typeof schema> & { $client: Database.Database };
export type Tx = Parameters<Parameters<Db["transaction"]>[0]>[0];
/** Whatever can be read through: the database itself, or a transaction. */
export type Reader = Db | Tx;

/**
 * Opens a SQLite file (":memory:" for tests) the way the product needs it: WAL, so that readers never wait
 * for the writer; synchronous FULL, because money and submissions are acknowledged only when they are on
 * disk; foreign keys on; five seconds of patience for the other process's write lock.
 */
export function openDatabase(file: string): Db {
  if (file !== ":memory:") mkdirSync(path.dirname(path.resolve(file)), { recursive: true });
  const sqlite = new Database(file);
  sqlite.pragma("journal_mode = WAL");
  sqlite.pragma("synchronous = FULL");
  sqlite.pragma("foreign_keys = ON");
  sqlite.pragma("busy_timeout = 5000");
  // Without it, "insert or replace" deletes rows of the append-only tables past their triggers.
  sqlite.pragma("recursive_triggers = ON");
  return drizzle(sqlite, { schema });
}

/** Applies the migrations of drizzle/ that the file has not seen. Run once, before web and worker start. */
export function migrateDatabase(db: Db): void {
  migrate(db, { migrationsFolder: path.resolve(process.cwd(), "drizzle") });
}

const holder = globalThis as { merestoneDb?: Db };

/** The process's one connection. Kept on globalThis because a development server reloads modules. */
export function getDb(): Db {
  holder.merestoneDb ??= openDatabase(env().DATABASE_FILE);
  return holder.merestoneDb;
}

/** Makes `db` the process's connection: tests and the seed run the use cases on a file of their own. */
export function setDb(db: Db): void {
  holder.merestoneDb = db;
}

/**
 * Runs `work` in one immediate transaction: the write lock is taken at the start, so that what is read
 * inside cannot change before it is written. Synchronous by nature; never await inside.
 */
export function inTransaction<T>(db: Db, work: (tx: Tx) => T): T {
  return db.transaction(work, { behavior: "immediate" });
}
