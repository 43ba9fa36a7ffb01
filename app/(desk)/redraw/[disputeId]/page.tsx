import type { Metadata } from "next";
import { notFound, redirect } from "next/navigation";
import { getDb } from "@/db/client";
import { findDispute, findRun } from "@/db/queries/work";
import { requirePageActor } from "@/lib/auth/page";
import { whyPartial } from "@/lib/market/disputes/impartial";
import { imageForDesk } from "@/lib/market/work/deskTask";
import { RedrawDesk } from "./RedrawDesk";

export const metadata: Metadata = { title: "Redraw" };

type Props = { params: Promise<{ disputeId: string }> };

/** The desk for an admin who draws a disputed picture anew; it opens with what was merged. */
export default async function RedrawPage({ params }: Props) {
  const actor = await requirePageActor("admin");
  const { disputeId } = await params;
  const db = getDb();
  const dispute = findDispute(db, disputeId);
  if (!dispute) notFound();
  if (dispute.status !== "open" || dispute.proposal || whyPartial(db, dispute, actor.id))
    redirect(`/docket/${disputeId}`);
  const frozen = dispute.evidence as { runId: string | null; briefVersion: number };
  const run = frozen.runId ? findRun(db, frozen.runId) : undefined;
  return (
    <RedrawDesk
      disputeId={disputeId}
      task={{
        ...imageForDesk(dispute.imageId, frozen.briefVersion),
        claimId: `redraw-${disputeId}`,
        expiresAtMs: Number.MAX_SAFE_INTEGER,
        draft: {
          instances: (run?.result.agreed ?? []).map((instance, index) => ({
            id: `merged-${index}`,
            classId: instance.classId,
            shape: instance.shape,
            origin: "drawn" as const,
            proposalId: null,
            crowd: instance.crowd,
            occluded: false,
            truncated: false,
            note: "",
          })),
          dismissedProposalIds: [],
        },
        draftVersion: 0,
      }}
    />
  );
}
