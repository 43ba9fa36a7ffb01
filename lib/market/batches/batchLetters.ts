import { and, count, eq, inArray, notInArray } from "drizzle-orm";
import type { Tx } from "@/db/client";
import type { BatchRow } from "@/db/queries/batches";
import { images, teamMembers, users } from "@/db/schema";
import { formatUsd } from "@/lib/ledger/amounts";
import { post } from "@/lib/market/mail";

/** Owners and editors of a team: who posts and pays. */
function listPosters(tx: Tx, teamId: string): string[] {
  return tx
    .select({ email: users.email })
    .from(teamMembers)
    .innerJoin(users, eq(users.id, teamMembers.userId))
    .where(and(eq(teamMembers.teamId, teamId), inArray(teamMembers.role, ["owner", "editor"])))
    .all()
    .map((row) => row.email);
}

/** Tells the team that a batch is funded and open, with what is held. */
export function tellFunded(tx: Tx, batch: BatchRow, holdCents: number, nowMs: number): void {
  for (const to of listPosters(tx, batch.teamId)) {
    post(
      tx,
      {
        to,
        subject: `Open: ${batch.title}`,
        lines: [
          `${batch.title} is on the board, and annotators can begin.`,
          `${formatUsd(holdCents)} is held for it, the most it can cost. What is not spent comes back when you close it.`,
        ],
        action: { label: "Watch it", path: `/batches/${batch.id}` },
        tag: "batch-open",
      },
      nowMs,
    );
  }
}

/** Tells the team when the last picture of a batch is settled; before that, nothing. */
export function tellIfAllSettled(
  tx: Tx,
  batch: Pick<BatchRow, "id" | "teamId" | "title">,
  nowMs: number,
): void {
  const left = tx
    .select({ count: count() })
    .from(images)
    .where(
      and(
        eq(images.batchId, batch.id),
        eq(images.status, "ready"),
        notInArray(images.consensusState, ["settled", "void"]),
      ),
    )
    .get();
  if ((left?.count ?? 0) > 0) return;
  for (const to of listPosters(tx, batch.teamId)) {
    post(
      tx,
      {
        to,
        subject: `Settled: ${batch.title}`,
        lines: [
          `Every picture of ${batch.title} is settled.`,
          "Look through the results, contest what is wrong within the window, build a release, and close the batch to get back what was not spent.",
        ],
        action: { label: "See the results", path: `/batches/${batch.id}` },
        tag: "batch-settled",
      },
      nowMs,
    );
  }
}
