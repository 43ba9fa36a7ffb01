import type { Tx } from "@/db/client";
import type { DisputeRow } from "@/db/queries/work";
import { post } from "@/lib/market/mail";
import { listImpartialAdmins } from "./impartial";
import type { Party } from "./parties";

type Words = { subject: string; lines: string[]; nowMs: number };

/** Writes to the admins who may act on a dispute, but for one who knows already. */
export function tellAdmins(
  tx: Tx,
  dispute: DisputeRow,
  { label, except, subject, lines, nowMs }: Words & { label: string; except?: string },
): void {
  for (const admin of listImpartialAdmins(tx, dispute)) {
    if (admin.id === except) continue;
    const action = { label, path: `/docket/${dispute.id}` };
    post(tx, { to: admin.email, subject, lines, action, tag: "docket" }, nowMs);
  }
}

/** Writes to those concerned, each with the way to the page where that person sees it. */
export function tellParties(
  tx: Tx,
  parties: readonly Party[],
  { subject, lines, tag, nowMs }: Words & { tag: string },
): void {
  for (const { email, path } of parties) {
    const label = path.startsWith("/work/") ? "See your score" : "See the picture";
    post(tx, { to: email, subject, lines, action: { label, path }, tag }, nowMs);
  }
}
