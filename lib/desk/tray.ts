import type { Dealing, DeskClass, DeskDocument, DeskInstance, DeskProposal } from "@/lib/contracts/desk";
import { boxIou, boxOfShape } from "@/lib/geometry/box";

/**
 * Seconds by which the tray is ordered. Keying and pointing are from the keystroke-level model (Card, Moran
 * and Newell, 1980): a mental step 1.35, a keystroke 0.28, a pointing 1.10, a click 0.20. Checking a dealt
 * proposal is one mental step and one key.
 */
export const SECONDS = {
  check: 1.35 + 0.28,
  drawBox: 1.35 + 2 * (1.1 + 0.2),
  drawOutline: 1.35 + 14 * (1.1 + 0.2) * 0.6,
  adjust: 1.35 + 2 * (1.1 + 0.2),
} as const;

/**
 * A right proposal with this probability of being kept saves drawing, less the adjusting that a share of them needs; a wrong one
 * costs a look.
 */
export function expectedSecondsSaved(
  score: number,
  geometry: "box" | "polygon",
  { adjustedShare }: Pick<Dealing, "adjustedShare"> = { adjustedShare: 0 },
): number {
  const drawing = geometry === "box" ? SECONDS.drawBox : SECONDS.drawOutline;
  // Whoever would adjust for longer than drawing takes draws instead.
  const saving = drawing - SECONDS.check - adjustedShare * Math.min(SECONDS.adjust, drawing);
  return score * saving - (1 - score) * SECONDS.check;
}

/** Overlap at which a proposal stands for something that is drawn already. */
const COVERED_IOU = 0.5;

/** At most so many wait in the tray: a person looks at few. */
const DEALT_MAX = 40;

/** Less likely than this, a proposal is not among the first few either. */
const SCORE_MIN = 0.02;

/**
 * The proposals worth the annotator's time, best first: those that save seconds in expectation, that were
 * not sent away or taken, and that no drawn shape covers. Until a batch's acceptance is measured the best
 * `firstFew` are dealt in any case, those that are gone counted among them. O(proposals x instances).
 */
export function deal(
  proposals: readonly DeskProposal[],
  document: DeskDocument,
  classes: readonly DeskClass[],
  dealing: Dealing = { adjustedShare: 0, firstFew: 0 },
): DeskProposal[] {
  const gone = new Set([
    ...document.dismissedProposalIds,
    ...document.instances.flatMap((instance) => (instance.proposalId ? [instance.proposalId] : [])),
  ]);
  const drawn = document.instances.map((instance) => boxOfShape(instance.shape));
  const geometryOf = new Map(classes.map((entry) => [entry.id, entry.geometry]));
  const usual = classes.some((entry) => entry.geometry === "polygon") ? "polygon" : "box";
  return proposals
    .map((proposal) => ({
      proposal,
      saved: expectedSecondsSaved(
        proposal.score,
        (proposal.classId ? geometryOf.get(proposal.classId) : undefined) ?? usual,
        dealing,
      ),
    }))
    .sort((a, b) => b.saved - a.saved || (a.proposal.id < b.proposal.id ? -1 : 1))
    .filter(
      ({ proposal, saved }, place) =>
        (saved > 0 || (place < dealing.firstFew && proposal.score >= SCORE_MIN)) &&
        !gone.has(proposal.id) &&
        !drawn.some((box) => boxIou(box, boxOfShape(proposal.shape)) >= COVERED_IOU),
    )
    .slice(0, DEALT_MAX)
    .map(({ proposal }) => proposal);
}

/** A proposal as an instance of a class, in the geometry that the class wants. */
export function taken(proposal: DeskProposal, kind: DeskClass, id: string): DeskInstance {
  const shape =
    kind.geometry === "box" ? ({ kind: "box", box: boxOfShape(proposal.shape) } as const) : proposal.shape;
  return {
    id,
    classId: kind.id,
    shape,
    origin: "taken",
    proposalId: proposal.id,
    crowd: false,
    occluded: false,
    truncated: false,
    note: "",
  };
}
