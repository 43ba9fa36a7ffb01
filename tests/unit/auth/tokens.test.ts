import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { mailTokens } from "@/db/schema";
import { issueToken, peekToken, redeemToken } from "@/lib/auth/tokens";
import { freshDb } from "@/tests/support/db";

const NOW_MS = 1_000_000;
const HOUR_MS = 3_600_000;

let db: Db;
beforeEach(() => {
  db = freshDb();
});

const issue = (purpose: "verify" | "reset" | "sign-in" | "invite", nowMs = NOW_MS) =>
  issueToken(db, { purpose, email: "isla@skerrow.example", nowMs });

describe("a link from a mail", () => {
  it("works once", () => {
    const secret = issue("reset");
    expect(peekToken(db, "reset", secret, NOW_MS)).toBeDefined();
    expect(redeemToken(db, "reset", secret, NOW_MS)?.email).toBe("isla@skerrow.example");
    expect(redeemToken(db, "reset", secret, NOW_MS)).toBeUndefined();
    expect(peekToken(db, "reset", secret, NOW_MS)).toBeUndefined();
  });

  it.each([
    ["verify", 48 * HOUR_MS],
    ["reset", HOUR_MS],
    ["sign-in", HOUR_MS / 4],
    ["invite", 7 * 24 * HOUR_MS],
  ] as const)("to %s ends after its time", (purpose, lifetimeMs) => {
    const secret = issue(purpose);
    expect(redeemToken(db, purpose, secret, NOW_MS + lifetimeMs)).toBeUndefined();
    expect(redeemToken(db, purpose, secret, NOW_MS + lifetimeMs - 1)).toBeDefined();
  });

  it("is for its purpose only", () => {
    const secret = issue("sign-in");
    expect(redeemToken(db, "reset", secret, NOW_MS)).toBeUndefined();
    expect(redeemToken(db, "sign-in", secret, NOW_MS)).toBeDefined();
  });

  it("ends the older one of the same purpose and no other", () => {
    const older = issue("reset");
    const other = issue("sign-in");
    const newer = issue("reset");
    expect(redeemToken(db, "reset", older, NOW_MS)).toBeUndefined();
    expect(redeemToken(db, "reset", newer, NOW_MS)).toBeDefined();
    expect(redeemToken(db, "sign-in", other, NOW_MS)).toBeDefined();
  });

  it("cannot be read out of the database", () => {
    const secret = issue("reset");
    expect(JSON.stringify(db.select().from(mailTokens).all())).not.toContain(secret);
    expect(Buffer.from(secret, "base64url")).toHaveLength(32);
  });

  it("that nobody made is unknown", () => {
    expect(redeemToken(db, "reset", "", NOW_MS)).toBeUndefined();
    expect(redeemToken(db, "reset", "x".repeat(43), NOW_MS)).toBeUndefined();
  });
});
