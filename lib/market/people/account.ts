import { eq, sql } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findUser, findUserByEmail } from "@/db/queries/people";
import { users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { hashPassword, isPassword } from "@/lib/auth/password";
import { issueToken, redeemToken } from "@/lib/auth/tokens";
import { AppError } from "@/lib/errors";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";

type By = { actor: Actor; nowMs: number };

export function updateAccount({
  actor,
  name,
  acceptsSensitive,
}: By & { name: string; acceptsSensitive: boolean }): void {
  getDb().update(users).set({ name, acceptsSensitive }).where(eq(users.id, actor.id)).run();
}

/** Ends every session of the person, this one too. */
export function signOutEverywhere({ actor, nowMs }: By): void {
  inTransaction(getDb(), (tx) => {
    tx.update(users)
      .set({ sessionEpoch: sql`${users.sessionEpoch} + 1` })
      .where(eq(users.id, actor.id))
      .run();
    audit(tx, { actorId: actor.id, action: "account.signed-out-everywhere", subject: actor.id, nowMs });
  });
}

/** Sets a new password after the current one was given (none is asked if there was none); ends other sessions. */
export async function changePassword({
  actor,
  nowMs,
  current,
  password,
}: By & { current: string; password: string }) {
  const user = findUser(getDb(), actor.id);
  if (user?.passwordHash && !(await isPassword(current, user.passwordHash))) {
    throw new AppError("invalid", "The current password is not right.", { current: "Not right." });
  }
  await storePassword(actor.id, password, nowMs);
}

/** Mails a link to set a new password; silent if the address has no account. */
export function sendResetLink({ email, nowMs }: { email: string; nowMs: number }): void {
  inTransaction(getDb(), (tx) => {
    const user = findUserByEmail(tx, email);
    if (!user) return;
    const secret = issueToken(tx, { purpose: "reset", email: user.email, userId: user.id, nowMs });
    post(
      tx,
      {
        to: user.email,
        subject: "Set a new password",
        lines: [
          "Open this link within an hour to set a new password. If you did not ask for it, do nothing.",
        ],
        action: { label: "Set a new password", path: `/reset?secret=${secret}` },
        tag: "reset",
      },
      nowMs,
    );
  });
}

/** Sets the password that a reset link asked for. The link works once; all sessions end. */
export async function resetPassword({
  secret,
  password,
  nowMs,
}: {
  secret: string;
  password: string;
  nowMs: number;
}) {
  const userId = inTransaction(getDb(), (tx) => redeemToken(tx, "reset", secret, nowMs)?.userId);
  if (!userId) throw new AppError("gone", "This link was used or is too old. Ask for a new one.");
  await storePassword(userId, password, nowMs);
}

async function storePassword(userId: string, password: string, nowMs: number): Promise<void> {
  const passwordHash = await hashPassword(password);
  inTransaction(getDb(), (tx) => {
    tx.update(users)
      .set({
        passwordHash,
        sessionEpoch: sql`${users.sessionEpoch} + 1`,
        emailVerifiedAtMs: sql`coalesce(${users.emailVerifiedAtMs}, ${nowMs})`,
      })
      .where(eq(users.id, userId))
      .run();
    audit(tx, { actorId: userId, action: "account.password-set", subject: userId, nowMs });
  });
}
