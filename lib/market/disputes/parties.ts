import { and, eq, inArray } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { findBatch } from "@/db/queries/batches";
import { getTeamRole } from "@/db/queries/people";
import { listSubmissionsOf, type DisputeRow } from "@/db/queries/work";
import { teamMembers, users } from "@/db/schema";

export type Party = { userId: string; email: string; path: string };

/** Whether a decision of a dispute on one score left everybody else's score as it was. */
const concernsOne = (dispute: DisputeRow) =>
  dispute.kind === "score" && (dispute.status === "open" || dispute.decision?.outcome === "keep");

/**
 * The annotators whom a dispute concerns: the one whose score is contested, or, where the whole picture is
 * looked at or every score was made anew, all who drew it.
 */
function listAnnotatorsIn(db: Reader, dispute: DisputeRow) {
  const list = listSubmissionsOf(db, dispute.imageId);
  return concernsOne(dispute) ? list.filter((row) => row.id === dispute.submissionId) : list;
}

/** Everybody concerned by a dispute with the page where each sees it: annotators, then who posts for the team. */
export function listPartiesOf(db: Reader, dispute: DisputeRow): Party[] {
  const own = listAnnotatorsIn(db, dispute);
  const annotators =
    own.length === 0
      ? []
      : db
          .select({ userId: users.id, email: users.email })
          .from(users)
          .where(
            inArray(
              users.id,
              own.map((row) => row.annotatorId),
            ),
          )
          .all()
          .map((person) => ({
            ...person,
            path: `/work/${own.find((row) => row.annotatorId === person.userId)?.id ?? ""}`,
          }));
  const batch = findBatch(db, dispute.batchId);
  const members = db
    .select({ userId: users.id, email: users.email })
    .from(teamMembers)
    .innerJoin(users, eq(users.id, teamMembers.userId))
    .where(and(eq(teamMembers.teamId, batch?.teamId ?? ""), inArray(teamMembers.role, ["owner", "editor"])))
    .all()
    .map((person) => ({ ...person, path: `/batches/${dispute.batchId}/images/${dispute.imageId}` }));
  return [...annotators, ...members];
}

/** Whether a person is of one of the two sides: an annotator whom it concerns, or an owner or editor of the team. */
export function isParty(db: Reader, dispute: DisputeRow, userId: string): boolean {
  if (listAnnotatorsIn(db, dispute).some((row) => row.annotatorId === userId)) return true;
  const batch = findBatch(db, dispute.batchId);
  const role = batch && getTeamRole(db, batch.teamId, userId);
  return role === "owner" || role === "editor";
}
