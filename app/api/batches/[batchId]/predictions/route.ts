import { nowMs } from "@/lib/clock";
import { BatchParams, ImportPredictionsInput, PREDICTIONS_BYTES_MAX } from "@/lib/contracts/batches";
import { ok, route } from "@/lib/http/route";
import { importPredictions, removePredictions } from "@/lib/market/proposals/importPredictions";

/** A requester hands over the predictions of an own model. */
export const POST = route(
  {
    role: "requester",
    params: BatchParams,
    body: ImportPredictionsInput,
    // As JSON text within JSON a file grows by its quotation marks.
    bodyBytesMax: 2 * PREDICTIONS_BYTES_MAX,
  },
  ({ actor, params, body }) => ok(importPredictions({ actor, nowMs: nowMs(), ...params, ...body })),
);

export const DELETE = route({ role: "requester", params: BatchParams }, ({ actor, params }) => {
  removePredictions({ actor, nowMs: nowMs(), ...params });
  return ok({});
});
