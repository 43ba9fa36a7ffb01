import { createHash } from "node:crypto";
import { asc, desc } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { auditLog } from "@/db/schema";
import { newId } from "@/lib/ids";

type Entry = {
  actorId: string | null;
  action: string;
  subject: string;
  detail?: Record<string, unknown>;
  nowMs: number;
};

const GENESIS = "0".repeat(64);

function hashOf(previous: string, id: string, entry: Required<Entry>): string {
  const text = JSON.stringify([
    previous,
    id,
    entry.actorId,
    entry.action,
    entry.subject,
    entry.detail,
    entry.nowMs,
  ]);
  return createHash("sha256").update(text).digest("hex");
}

/** Adds one entry to the audit log, chained to the one before by SHA-256, in the caller's transaction. */
export function audit(tx: Reader, { actorId, action, subject, detail = {}, nowMs }: Entry): void {
  const last = tx
    .select({ hash: auditLog.hash })
    .from(auditLog)
    .orderBy(desc(auditLog.sequence))
    .limit(1)
    .get();
  const previousHash = last?.hash ?? GENESIS;
  const id = newId("aud");
  const hash = hashOf(previousHash, id, { actorId, action, subject, detail, nowMs });
  tx.insert(auditLog).values({ id, actorId, action, subject, detail, atMs: nowMs, previousHash, hash }).run();
}

/** The sequence number of the first entry that does not fit the chain, or null when all do. O(entries). */
export function findAuditBreak(db: Reader): number | null {
  let previous = GENESIS;
  for (const row of db.select().from(auditLog).orderBy(asc(auditLog.sequence)).all()) {
    const { actorId, action, subject, detail, atMs } = row;
    const expected = hashOf(previous, row.id, { actorId, action, subject, detail, nowMs: atMs });
    if (row.previousHash !== previous || row.hash !== expected) return row.sequence;
    previous = row.hash;
  }
  return null;
}
