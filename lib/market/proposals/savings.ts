import type { Acceptance } from "@/db/queries/proposals";
import { SECONDS } from "@/lib/desk/tray";

export type Savings = {
  /** Proposals that somebody decided on, and the shares of them; null where there are none. */
  decided: number;
  takenShare: number | null;
  adjustedShare: number | null;
  dismissedShare: number | null;
  /** Of all shapes handed in, the share that began as a proposal; null where nothing was handed in. */
  coveredShare: number | null;
  /** Working time that proposals saved, less the looks at those sent away; below zero where they cost time. */
  savedSeconds: number;
  /** What the saved time would have cost at the batch's own median pay an hour; null where none is measured. */
  savedCents: number | null;
};

/**
 * What proposals did for a batch: shares of decisions, and the time between drawing by hand and deciding on a proposal, by the
 * keystroke-level model that also orders the tray (`SECONDS`). Proposals that nobody decided on count for nothing.
 */
export function savingsOf(seen: Acceptance, hourlyCents: number | null): Savings {
  const taken = seen.takenBoxes + seen.takenOutlines;
  const adjusted = seen.adjustedBoxes + seen.adjustedOutlines;
  const decided = taken + adjusted + seen.dismissed;
  const shapes = taken + adjusted + seen.drawn;
  const savedSeconds =
    seen.takenBoxes * (SECONDS.drawBox - SECONDS.check) +
    seen.takenOutlines * (SECONDS.drawOutline - SECONDS.check) +
    seen.adjustedBoxes * (SECONDS.drawBox - SECONDS.check - SECONDS.adjust) +
    seen.adjustedOutlines * (SECONDS.drawOutline - SECONDS.check - SECONDS.adjust) -
    seen.dismissed * SECONDS.check;
  const share = (part: number, of: number) => (of === 0 ? null : part / of);
  return {
    decided,
    takenShare: share(taken, decided),
    adjustedShare: share(adjusted, decided),
    dismissedShare: share(seen.dismissed, decided),
    coveredShare: share(taken + adjusted, shapes),
    savedSeconds,
    savedCents: hourlyCents === null ? null : Math.round((savedSeconds * hourlyCents) / 3600),
  };
}
