import { nowMs } from "@/lib/clock";
import { ClaimParams, SubmitInput } from "@/lib/contracts/work";
import { created, route } from "@/lib/http/route";
import { submitWork } from "@/lib/market/work/submitWork";

/** Hands the drawing in. */
export const POST = route(
  { role: "annotator", params: ClaimParams, body: SubmitInput, bodyBytesMax: 8_000_000 },
  ({ actor, params, body }) => {
    const submission = submitWork({ actor, nowMs: nowMs(), ...params, ...body });
    return created(`/work/${submission.submissionId}`, submission);
  },
);
