import { createHash, randomBytes } from "node:crypto";
import { and, eq, isNull } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { findLiveToken, type MailTokenRow } from "@/db/queries/people";
import { mailTokens } from "@/db/schema";
import { newId } from "@/lib/ids";

type Purpose = MailTokenRow["purpose"];

const LIFETIME_MS: Record<Purpose, number> = {
  verify: 48 * 3_600_000,
  reset: 3_600_000,
  "sign-in": 900_000,
  invite: 7 * 86_400_000,
};

function hashOf(secret: string): string {
  return createHash("sha256").update(secret).digest("hex");
}

type NewToken = {
  purpose: Purpose;
  email: string;
  userId?: string | null;
  inviteId?: string | null;
  nowMs: number;
};

/** Makes a one-time link secret (256 random bits, base64url) and ends older ones of the same purpose. */
export function issueToken(tx: Reader, { purpose, email, userId, inviteId, nowMs }: NewToken): string {
  const secret = randomBytes(32).toString("base64url");
  if (purpose !== "invite") {
    tx.update(mailTokens)
      .set({ usedAtMs: nowMs })
      .where(and(eq(mailTokens.email, email), eq(mailTokens.purpose, purpose), isNull(mailTokens.usedAtMs)))
      .run();
  }
  tx.insert(mailTokens)
    .values({
      id: newId("tok"),
      secretHash: hashOf(secret),
      purpose,
      email,
      userId: userId ?? null,
      inviteId: inviteId ?? null,
      createdAtMs: nowMs,
      expiresAtMs: nowMs + LIFETIME_MS[purpose],
    })
    .run();
  return secret;
}

/** The live token of a secret without using it up, or undefined. */
export function peekToken(
  db: Reader,
  purpose: Purpose,
  secret: string,
  nowMs: number,
): MailTokenRow | undefined {
  return findLiveToken(db, hashOf(secret), purpose, nowMs);
}

/** Uses the token up; undefined when it is unknown, used or expired. Works once, whoever is first. */
export function redeemToken(
  tx: Reader,
  purpose: Purpose,
  secret: string,
  nowMs: number,
): MailTokenRow | undefined {
  const token = findLiveToken(tx, hashOf(secret), purpose, nowMs);
  if (!token) return undefined;
  const used = tx
    .update(mailTokens)
    .set({ usedAtMs: nowMs })
    .where(and(eq(mailTokens.id, token.id), isNull(mailTokens.usedAtMs)))
    .run();
  return used.changes === 1 ? token : undefined;
}
