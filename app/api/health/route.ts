import { getDb } from "@/db/client";

export const dynamic = "force-dynamic";

/** Whether the application and its database answer. */
export function GET(): Response {
  getDb().$client.prepare("select 1").get();
  return Response.json({ ok: true }, { headers: { "cache-control": "no-store" } });
}
