import { nowMs } from "@/lib/clock";
import { ClaimParams } from "@/lib/contracts/work";
import { ok, route } from "@/lib/http/route";
import { deskTask } from "@/lib/market/work/deskTask";
import { releaseClaim } from "@/lib/market/work/keepClaim";

/** The task of a claim, as the desk opens it. */
export const GET = route({ role: "annotator", params: ClaimParams }, ({ actor, params }) =>
  ok(deskTask({ actor, ...params })),
);

/** Gives the image back. */
export const DELETE = route({ role: "annotator", params: ClaimParams }, ({ actor, params }) => {
  releaseClaim({ actor, nowMs: nowMs(), ...params });
  return ok({});
});
