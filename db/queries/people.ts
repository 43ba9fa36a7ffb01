import { and, asc, desc, eq, gt, isNull, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { mailTokens, teamInvites, teamMembers, teams, users } from "@/db/schema";

export type UserRow = typeof users.$inferSelect;
export type TeamRow = typeof teams.$inferSelect;
export type TeamRole = (typeof teamMembers.$inferSelect)["role"];
export type MailTokenRow = typeof mailTokens.$inferSelect;

export function findUser(db: Reader, userId: string): UserRow | undefined {
  return db.select().from(users).where(eq(users.id, userId)).get();
}

/** By e-mail, whatever its case. */
export function findUserByEmail(db: Reader, email: string): UserRow | undefined {
  return db.select().from(users).where(eq(users.email, email.trim().toLowerCase())).get();
}

export function findTeam(db: Reader, teamId: string): TeamRow | undefined {
  return db.select().from(teams).where(eq(teams.id, teamId)).get();
}

/** A person's role in a team, or undefined for an outsider. */
export function getTeamRole(db: Reader, teamId: string, userId: string): TeamRole | undefined {
  return db
    .select({ role: teamMembers.role })
    .from(teamMembers)
    .where(and(eq(teamMembers.teamId, teamId), eq(teamMembers.userId, userId)))
    .get()?.role;
}

/** The teams of a person, oldest membership first. */
export function listTeamsOf(db: Reader, userId: string): (TeamRow & { role: TeamRole })[] {
  return db
    .select({ id: teams.id, name: teams.name, createdAtMs: teams.createdAtMs, role: teamMembers.role })
    .from(teamMembers)
    .innerJoin(teams, eq(teams.id, teamMembers.teamId))
    .where(eq(teamMembers.userId, userId))
    .orderBy(asc(teamMembers.joinedAtMs), asc(teams.id))
    .all();
}

/** Members of a team, owners first, then by name. */
export function listTeamMembers(db: Reader, teamId: string) {
  return db
    .select({
      userId: users.id,
      name: users.name,
      email: users.email,
      role: teamMembers.role,
      joinedAtMs: teamMembers.joinedAtMs,
    })
    .from(teamMembers)
    .innerJoin(users, eq(users.id, teamMembers.userId))
    .where(eq(teamMembers.teamId, teamId))
    .orderBy(
      sql`case ${teamMembers.role} when 'owner' then 0 when 'editor' then 1 else 2 end`,
      asc(users.name),
    )
    .all();
}

/** Invitations that can still be accepted, newest first. */
export function listOpenInvites(db: Reader, teamId: string, nowMs: number) {
  return db
    .select()
    .from(teamInvites)
    .where(
      and(
        eq(teamInvites.teamId, teamId),
        isNull(teamInvites.acceptedAtMs),
        isNull(teamInvites.revokedAtMs),
        gt(teamInvites.expiresAtMs, nowMs),
      ),
    )
    .orderBy(desc(teamInvites.createdAtMs))
    .all();
}

export function findInvite(db: Reader, inviteId: string) {
  return db.select().from(teamInvites).where(eq(teamInvites.id, inviteId)).get();
}

/** An unused, unexpired link by the hash of its secret. */
export function findLiveToken(
  db: Reader,
  secretHash: string,
  purpose: MailTokenRow["purpose"],
  nowMs: number,
): MailTokenRow | undefined {
  return db
    .select()
    .from(mailTokens)
    .where(
      and(
        eq(mailTokens.secretHash, secretHash),
        eq(mailTokens.purpose, purpose),
        isNull(mailTokens.usedAtMs),
        gt(mailTokens.expiresAtMs, nowMs),
      ),
    )
    .get();
}

/** All people for the admin's page, newest first. */
export function listPeople(
  db: Reader,
  { limit, search = "" }: { limit: number; search?: string },
): UserRow[] {
  const like = `%${search.replace(/[%_]/g, "")}%`;
  return db
    .select()
    .from(users)
    .where(search ? sql`${users.email} like ${like} or ${users.name} like ${like}` : undefined)
    .orderBy(desc(users.createdAtMs), asc(users.id))
    .limit(limit)
    .all();
}
