import { eq, sql } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { auditLog } from "@/db/schema";
import { audit, findAuditBreak } from "@/lib/market/audit";
import { freshDb } from "@/tests/support/db";
import { START_MS } from "@/tests/support/market";

let db: Db;
beforeEach(() => {
  db = freshDb();
  for (let n = 1; n <= 5; n++)
    audit(db, {
      actorId: n % 2 ? "usr_a" : null,
      action: "batch.funded",
      subject: `bat_${n}`,
      detail: { holdCents: n, none: null, gone: undefined, nested: { z: 1, a: ["é", 0.1] } },
      nowMs: START_MS + n,
    });
});

/** What somebody with the file in hand could do: the triggers stop everybody else. */
const withoutTriggers = (tamper: () => unknown) => {
  db.run(sql`drop trigger audit_log_no_update`);
  db.run(sql`drop trigger audit_log_no_delete`);
  tamper();
};
const third = eq(auditLog.sequence, 3);

describe("the audit log", () => {
  it("holds together, empty too", () => {
    expect(findAuditBreak(db)).toBeNull();
    expect(findAuditBreak(freshDb())).toBeNull();
  });

  it("refuses changes and removals", () => {
    expect(() => db.update(auditLog).set({ action: "nothing" }).run()).toThrow(/append-only/);
    expect(() => db.delete(auditLog).run()).toThrow(/append-only/);
    expect(() => db.run(sql`insert or replace into audit_log select * from audit_log limit 1`)).toThrow();
  });

  it.each<[string, number, () => unknown]>([
    ["actor", 3, () => db.update(auditLog).set({ actorId: "usr_b" }).where(third).run()],
    [
      "amount",
      3,
      () =>
        db
          .update(auditLog)
          .set({ detail: { holdCents: 300 } })
          .where(third)
          .run(),
    ],
    ["time", 3, () => db.update(auditLog).set({ atMs: 0 }).where(third).run()],
    [
      "hash",
      3,
      () =>
        db
          .update(auditLog)
          .set({ hash: "0".repeat(64) })
          .where(third)
          .run(),
    ],
    [
      "link",
      3,
      () =>
        db
          .update(auditLog)
          .set({ previousHash: "0".repeat(64) })
          .where(third)
          .run(),
    ],
    ["presence", 4, () => db.delete(auditLog).where(third).run()],
    ["beginning", 2, () => db.delete(auditLog).where(eq(auditLog.sequence, 1)).run()],
  ])("shows the entry whose %s was tampered with", (_what, sequence, tamper) => {
    withoutTriggers(tamper);
    expect(findAuditBreak(db)).toBe(sequence);
  });
});
