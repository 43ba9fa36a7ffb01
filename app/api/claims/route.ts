import { nowMs } from "@/lib/clock";
import { ClaimInput } from "@/lib/contracts/work";
import { created, route } from "@/lib/http/route";
import { claimTask } from "@/lib/market/work/claimTask";

/** Holds an image of a batch for the annotator. */
export const POST = route({ role: "annotator", body: ClaimInput }, ({ actor, body }) => {
  const claim = claimTask({ actor, nowMs: nowMs(), ...body });
  return created(`/api/claims/${claim.id}`, {
    claimId: claim.id,
    imageId: claim.imageId,
    expiresAtMs: claim.expiresAtMs,
  });
});
