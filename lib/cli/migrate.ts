import { migrateDatabase, getDb } from "@/db/client";

migrateDatabase(getDb());
