import type { Reader } from "@/db/client";
import { findBatch, type BatchRow } from "@/db/queries/batches";
import { getTeamRole, type TeamRole } from "@/db/queries/people";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";

const RANK: Record<TeamRole, number> = { viewer: 1, editor: 2, owner: 3 };

/** The actor's role in a team must be `least` or more; outsiders learn only that there is nothing. */
export function requireTeam(db: Reader, teamId: string, actor: Actor, least: TeamRole): TeamRole {
  const role = getTeamRole(db, teamId, actor.id);
  if (!role) throw new AppError("not_found", "There is no such team.");
  if (RANK[role] < RANK[least])
    throw new AppError("forbidden", `This takes the role ${least} in the team; yours is ${role}.`);
  return role;
}

/** The batch, if the actor may see it (members of its team; admins may look). */
export function requireBatch(
  db: Reader,
  batchId: string,
  actor: Actor,
  least: TeamRole = "viewer",
): BatchRow {
  const batch = findBatch(db, batchId);
  if (!batch) throw new AppError("not_found", "There is no such batch.");
  if (actor.role === "admin" && least === "viewer") return batch;
  const role = getTeamRole(db, batch.teamId, actor.id);
  if (!role) throw new AppError("not_found", "There is no such batch.");
  if (RANK[role] < RANK[least])
    throw new AppError("forbidden", `This takes the role ${least} in the team; yours is ${role}.`);
  return batch;
}
