import { migrateDatabase, openDatabase, setDb, type Db } from "@/db/client";

/** A fresh, migrated database in memory, made the process's own so that use cases write to it. */
export function freshDb(): Db {
  const db = openDatabase(":memory:");
  migrateDatabase(db);
  setDb(db);
  return db;
}
