import type { Reader } from "@/db/client";
import { countAcceptance, listProposalVerdicts, listSettledProposals } from "@/db/queries/proposals";
import type { Dealing } from "@/lib/contracts/desk";
import { calibrationOf, judgeBySettled, type Calibration, type Judged } from "@/lib/proposals/dealing";

/** The latest that is looked at: older evidence is of proposals that learning has replaced. */
const SETTLED_MAX = 24;
const SUBMISSIONS_MAX = 120;
/** So many verdicts of people measure a batch's acceptance; before, a few are dealt whatever their score. */
const VERDICTS_MIN = 30;
/** Dealt before any acceptance is measured. A wrong one costs a look of under two seconds, and each is evidence. */
const FIRST_FEW = 6;
/** Of four proposals taken one is adjusted: a prior with the weight of so many proposals. */
const ADJUSTED_PRIOR = { adjusted: 5, of: 20 };

/**
 * How the tray deals in a batch: what its people did with proposals and what its settled pictures say of those that nobody
 * looked at turn the engine's scores into probabilities, and the share that needed adjusting is weighed in.
 */
export function batchDealing(db: Reader, batchId: string): { dealing: Dealing; calibration: Calibration } {
  const judged: Judged[] = [];
  let verdicts = 0;
  for (const { document, proposals } of listProposalVerdicts(db, batchId, SUBMISSIONS_MAX)) {
    const byId = new Map(proposals.map((proposal) => [proposal.id, proposal]));
    const judge = (proposalId: string | null, isKept: boolean) => {
      const proposal = proposalId === null ? undefined : byId.get(proposalId);
      if (!proposal) return;
      verdicts++;
      judged.push({ source: proposal.source, score: proposal.score, isKept });
    };
    for (const { proposalId } of document.instances) judge(proposalId, true);
    for (const proposalId of document.dismissedProposalIds) judge(proposalId, false);
  }
  for (const { proposals, result } of listSettledProposals(db, batchId, SETTLED_MAX)) {
    judged.push(
      ...judgeBySettled(
        proposals,
        result.agreed.map(({ box }) => box),
      ),
    );
  }
  const seen = countAcceptance(db, batchId);
  const adjusted = seen.adjustedBoxes + seen.adjustedOutlines;
  const kept = adjusted + seen.takenBoxes + seen.takenOutlines;
  return {
    calibration: calibrationOf(judged),
    dealing: {
      adjustedShare: (adjusted + ADJUSTED_PRIOR.adjusted) / (kept + ADJUSTED_PRIOR.of),
      firstFew: verdicts >= VERDICTS_MIN ? 0 : FIRST_FEW,
    },
  };
}
