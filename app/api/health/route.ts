import { sql } from "drizzle-orm";
import { getDb } from "@/db/client";

export const dynamic = "force-dynamic";

/** Whether the application and its database answer. */
export function GET(): Response {
  getDb().get(sql`select 1`);
  return Response.json({ ok: true }, { headers: { "cache-control": "no-store" } });
}
