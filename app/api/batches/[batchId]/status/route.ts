import { BatchParams } from "@/lib/contracts/batches";
import { ok, route } from "@/lib/http/route";
import { batchStatus } from "@/lib/market/batches/batchStatus";

/** How far a batch and its background work are: what the batch page polls. */
export const GET = route({ role: ["requester", "admin"], params: BatchParams }, ({ actor, params }) =>
  ok(batchStatus({ actor, ...params })),
);
