import { nowMs } from "@/lib/clock";
import { ClaimParams } from "@/lib/contracts/work";
import { ok, route } from "@/lib/http/route";
import { heartbeat } from "@/lib/market/work/keepClaim";

/** A sign of life from the desk. */
export const POST = route({ role: "annotator", params: ClaimParams }, ({ actor, params }) =>
  ok(heartbeat({ actor, nowMs: nowMs(), ...params })),
);
