import { nowMs } from "@/lib/clock";
import { ConfirmInput, DisputeParams } from "@/lib/contracts/work";
import { ok, route } from "@/lib/http/route";
import { confirmProposal } from "@/lib/market/disputes/decideDispute";

/** A second admin confirms a proposed decision or sends it back. */
export const POST = route(
  { role: "admin", params: DisputeParams, body: ConfirmInput },
  ({ actor, params, body }) => ok(confirmProposal({ actor, nowMs: nowMs(), ...params, answer: body })),
);
