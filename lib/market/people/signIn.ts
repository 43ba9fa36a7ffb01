import { eq } from "drizzle-orm";
import { getDb, inTransaction } from "@/db/client";
import { findUser, findUserByEmail, type UserRow } from "@/db/queries/people";
import { users } from "@/db/schema";
import { issueToken, redeemToken } from "@/lib/auth/tokens";
import { post } from "@/lib/market/mail";

/** Sends a sign-in link if the address has an account; the answer is the same if it has none. */
export function sendSignInLink({ email, nowMs }: { email: string; nowMs: number }): void {
  inTransaction(getDb(), (tx) => {
    const user = findUserByEmail(tx, email);
    if (!user || user.status !== "active") return;
    const secret = issueToken(tx, { purpose: "sign-in", email: user.email, userId: user.id, nowMs });
    post(
      tx,
      {
        to: user.email,
        subject: "Your sign-in link",
        lines: [
          `Hello ${user.name},`,
          "This link signs you in once, within the next 15 minutes. If you did not ask for it, do nothing.",
        ],
        action: { label: "Sign in to Merestone", path: `/link?secret=${secret}` },
        tag: "sign-in",
      },
      nowMs,
    );
  });
}

/**
 * The person that a link from a mail belongs to: a sign-in link, or the first confirmation of an address
 * (which both prove that the mailbox is theirs). Uses the link up; null when it is spent or too old. A
 * password that was set before the address was confirmed goes when a sign-in link confirms it: whoever signed
 * up with somebody else's address must not keep a key to the account.
 */
export function redeemSignInLink({ secret, nowMs }: { secret: string; nowMs: number }): UserRow | null {
  return inTransaction(getDb(), (tx) => {
    const confirmation = redeemToken(tx, "verify", secret, nowMs);
    const token = confirmation ?? redeemToken(tx, "sign-in", secret, nowMs);
    const user = token?.userId ? findUser(tx, token.userId) : undefined;
    if (!user || user.status !== "active") return null;
    if (user.emailVerifiedAtMs === null) {
      tx.update(users)
        .set({ emailVerifiedAtMs: nowMs, ...(!confirmation && { passwordHash: null }) })
        .where(eq(users.id, user.id))
        .run();
    }
    return { ...user, emailVerifiedAtMs: user.emailVerifiedAtMs ?? nowMs };
  });
}
