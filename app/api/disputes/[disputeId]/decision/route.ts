import { nowMs } from "@/lib/clock";
import { DecideInput, DisputeParams } from "@/lib/contracts/work";
import { ok, route } from "@/lib/http/route";
import { decideDispute } from "@/lib/market/disputes/decideDispute";

/** An admin's decision on a dispute. */
export const POST = route(
  { role: "admin", params: DisputeParams, body: DecideInput, bodyBytesMax: 8_000_000 },
  ({ actor, params, body }) => ok(decideDispute({ actor, nowMs: nowMs(), ...params, decision: body })),
);
