import { getDb, inTransaction } from "@/db/client";
import { findUserByEmail } from "@/db/queries/people";
import { teamMembers, teams, users } from "@/db/schema";
import { hashPassword } from "@/lib/auth/password";
import { issueToken } from "@/lib/auth/tokens";
import type { SignUpInput } from "@/lib/contracts/people";
import { newId } from "@/lib/ids";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";

/**
 * Makes an account that waits for its e-mail to be confirmed, with a team of its own for a requester, and
 * mails the link. An address that is taken gets a mail that says so instead; the screen shows the same.
 */
export async function signUp({ input, nowMs }: { input: SignUpInput; nowMs: number }): Promise<void> {
  const passwordHash = input.password ? await hashPassword(input.password) : null;
  inTransaction(getDb(), (tx) => {
    const existing = findUserByEmail(tx, input.email);
    if (existing) {
      const secret = issueToken(tx, {
        purpose: "sign-in",
        email: existing.email,
        userId: existing.id,
        nowMs,
      });
      post(
        tx,
        {
          to: existing.email,
          subject: "You already have an account",
          lines: ["Somebody, probably you, asked for a new account with this address. There is one already."],
          action: { label: "Sign in", path: `/link?secret=${secret}` },
          tag: "sign-up",
        },
        nowMs,
      );
      return;
    }
    const userId = newId("usr");
    tx.insert(users)
      .values({
        id: userId,
        email: input.email,
        name: input.name,
        passwordHash,
        role: input.role,
        createdAtMs: nowMs,
      })
      .run();
    if (input.role === "requester") {
      const teamId = newId("tem");
      tx.insert(teams)
        .values({ id: teamId, name: input.teamName || `${input.name}'s team`, createdAtMs: nowMs })
        .run();
      tx.insert(teamMembers).values({ teamId, userId, role: "owner", joinedAtMs: nowMs }).run();
    }
    const secret = issueToken(tx, { purpose: "verify", email: input.email, userId, nowMs });
    post(
      tx,
      {
        to: input.email,
        subject: "Confirm your e-mail",
        lines: [
          `Welcome, ${input.name}.`,
          "Open this link to confirm your address and sign in. It works for two days.",
        ],
        action: { label: "Confirm and sign in", path: `/link?secret=${secret}` },
        tag: "verify",
      },
      nowMs,
    );
    audit(tx, {
      actorId: userId,
      action: "account.created",
      subject: userId,
      detail: { role: input.role },
      nowMs,
    });
  });
}
