import { and, eq, isNull } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import {
  findInvite,
  findUser,
  findUserByEmail,
  getTeamRole,
  listTeamMembers,
  type TeamRole,
} from "@/db/queries/people";
import { teamInvites, teamMembers, teams, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { issueToken, peekToken, redeemToken } from "@/lib/auth/tokens";
import { AppError } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";

type By = { actor: Actor; nowMs: number };

const INVITE_LIFETIME_MS = 7 * 86_400_000;

function requireOwner(tx: Tx, teamId: string, actor: Actor): void {
  const role = getTeamRole(tx, teamId, actor.id);
  if (!role) throw new AppError("not_found", "There is no such team.");
  if (role !== "owner") throw new AppError("forbidden", "Only an owner of the team can do this.");
}

/** Invites a colleague by mail. Somebody who is a member already is a conflict. */
export function inviteColleague({
  actor,
  nowMs,
  teamId,
  email,
  role,
}: By & { teamId: string; email: string; role: TeamRole }) {
  inTransaction(getDb(), (tx) => {
    requireOwner(tx, teamId, actor);
    const known = findUserByEmail(tx, email);
    if (known && getTeamRole(tx, teamId, known.id))
      throw new AppError("conflict", `${email} is in the team already.`);
    if (known && known.role !== "requester") {
      throw new AppError(
        "conflict",
        `${email} has an account of another kind. Ask them for a different address.`,
      );
    }
    const inviteId = newId("inv");
    tx.update(teamInvites)
      .set({ revokedAtMs: nowMs })
      .where(
        and(eq(teamInvites.teamId, teamId), eq(teamInvites.email, email), isNull(teamInvites.acceptedAtMs)),
      )
      .run();
    tx.insert(teamInvites)
      .values({
        id: inviteId,
        teamId,
        email,
        role,
        invitedBy: actor.id,
        createdAtMs: nowMs,
        expiresAtMs: nowMs + INVITE_LIFETIME_MS,
      })
      .run();
    const team = tx.select().from(teams).where(eq(teams.id, teamId)).get();
    const secret = issueToken(tx, { purpose: "invite", email, inviteId, nowMs });
    post(
      tx,
      {
        to: email,
        subject: `${actor.name} invites you to ${team?.name ?? "a team"}`,
        lines: [
          `${actor.name} shares the team "${team?.name ?? ""}" on Merestone with you, as ${role}.`,
          "The link works for a week.",
        ],
        action: { label: "Join the team", path: `/invitation?secret=${secret}` },
        tag: "invite",
      },
      nowMs,
    );
    audit(tx, { actorId: actor.id, action: "team.invited", subject: teamId, detail: { email, role }, nowMs });
  });
}

/** What an invitation link offers, without using it up. */
export function findInvitation({ secret, nowMs }: { secret: string; nowMs: number }) {
  const db = getDb();
  const token = peekToken(db, "invite", secret, nowMs);
  const invite = token?.inviteId ? findInvite(db, token.inviteId) : undefined;
  if (!invite || invite.revokedAtMs !== null || invite.acceptedAtMs !== null) return null;
  const team = db.select().from(teams).where(eq(teams.id, invite.teamId)).get();
  return {
    email: invite.email,
    role: invite.role,
    teamName: team?.name ?? "",
    hasAccount: Boolean(findUserByEmail(db, invite.email)),
  };
}

/**
 * Joins the team. The link proves the mailbox, so somebody new gets a confirmed account at once. Returns a
 * sign-in secret for the person who joined.
 */
export function acceptInvitation({
  secret,
  name,
  nowMs,
}: {
  secret: string;
  name: string;
  nowMs: number;
}): string {
  return inTransaction(getDb(), (tx) => {
    const token = redeemToken(tx, "invite", secret, nowMs);
    const invite = token?.inviteId ? findInvite(tx, token.inviteId) : undefined;
    if (!invite || invite.revokedAtMs !== null || invite.acceptedAtMs !== null) {
      throw new AppError("gone", "This invitation was used, withdrawn or is too old. Ask for a new one.");
    }
    const existing = findUserByEmail(tx, invite.email);
    if (existing && existing.role !== "requester") {
      throw new AppError(
        "conflict",
        "Your account is of another kind. Ask for an invitation to a different address.",
      );
    }
    const userId = existing?.id ?? newId("usr");
    if (!existing) {
      tx.insert(users)
        .values({
          id: userId,
          email: invite.email,
          name: name || invite.email,
          role: "requester",
          emailVerifiedAtMs: nowMs,
          createdAtMs: nowMs,
        })
        .run();
    }
    tx.insert(teamMembers)
      .values({ teamId: invite.teamId, userId, role: invite.role, joinedAtMs: nowMs })
      .onConflictDoNothing()
      .run();
    tx.update(teamInvites).set({ acceptedAtMs: nowMs }).where(eq(teamInvites.id, invite.id)).run();
    audit(tx, {
      actorId: userId,
      action: "team.joined",
      subject: invite.teamId,
      detail: { role: invite.role },
      nowMs,
    });
    return issueToken(tx, { purpose: "sign-in", email: invite.email, userId, nowMs });
  });
}

export function revokeInvite({ actor, nowMs, inviteId }: By & { inviteId: string }): void {
  inTransaction(getDb(), (tx) => {
    const invite = findInvite(tx, inviteId);
    if (!invite) throw new AppError("not_found", "There is no such invitation.");
    requireOwner(tx, invite.teamId, actor);
    tx.update(teamInvites).set({ revokedAtMs: nowMs }).where(eq(teamInvites.id, inviteId)).run();
  });
}

/** Changes a member's role or removes the member. The last owner stays. */
export function changeMember({
  actor,
  nowMs,
  teamId,
  userId,
  role,
}: By & { teamId: string; userId: string; role: TeamRole | "remove" }) {
  inTransaction(getDb(), (tx) => {
    requireOwner(tx, teamId, actor);
    if (!getTeamRole(tx, teamId, userId)) throw new AppError("not_found", "There is no such member.");
    const owners = listTeamMembers(tx, teamId).filter((member) => member.role === "owner");
    if (role !== "owner" && owners.length === 1 && owners[0]?.userId === userId) {
      throw new AppError("conflict", "A team keeps at least one owner. Make somebody else owner first.");
    }
    const member = and(eq(teamMembers.teamId, teamId), eq(teamMembers.userId, userId));
    if (role === "remove") tx.delete(teamMembers).where(member).run();
    else tx.update(teamMembers).set({ role }).where(member).run();
    audit(tx, {
      actorId: actor.id,
      action: "team.member-changed",
      subject: teamId,
      detail: { userId, role },
      nowMs,
    });
  });
}

/** Suspends an account (its sessions end at once) or lifts the suspension. An admin gives the reason. */
export function setSuspended({
  actor,
  nowMs,
  userId,
  suspended,
  reason,
}: By & { userId: string; suspended: boolean; reason: string }) {
  inTransaction(getDb(), (tx) => {
    if (userId === actor.id) throw new AppError("conflict", "You cannot suspend yourself.");
    if (!findUser(tx, userId)) throw new AppError("not_found", "There is no such account.");
    tx.update(users)
      .set({ status: suspended ? "suspended" : "active" })
      .where(eq(users.id, userId))
      .run();
    audit(tx, {
      actorId: actor.id,
      action: suspended ? "account.suspended" : "account.restored",
      subject: userId,
      detail: { reason },
      nowMs,
    });
  });
}
