import { nowMs } from "@/lib/clock";
import { ClaimParams, DraftInput } from "@/lib/contracts/work";
import { ok, route } from "@/lib/http/route";
import { saveDraft } from "@/lib/market/work/keepClaim";

/** Keeps the drawing as it is so far. */
export const PUT = route(
  { role: "annotator", params: ClaimParams, body: DraftInput, bodyBytesMax: 8_000_000 },
  ({ actor, params, body }) => ok(saveDraft({ actor, nowMs: nowMs(), ...params, ...body })),
);
