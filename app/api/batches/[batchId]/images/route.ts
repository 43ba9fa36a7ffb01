import { getDb } from "@/db/client";
import { listImages } from "@/db/queries/batches";
import { nowMs } from "@/lib/clock";
import { BatchParams, ImageView, PlanUploadsInput } from "@/lib/contracts/batches";
import { ok, route } from "@/lib/http/route";
import { requireBatch } from "@/lib/market/access";
import { planUploads } from "@/lib/market/images/planUploads";

/** The images of a batch with their state, in upload order. */
export const GET = route({ role: ["requester", "admin"], params: BatchParams }, ({ actor, params }) => {
  const batch = requireBatch(getDb(), params.batchId, actor);
  return ok({
    images: listImages(getDb(), batch.id, { limit: 1000 }).map((image) => ImageView.parse(image)),
  });
});

/** Announces files; the answer says for each what to do. 500 files at most. */
export const POST = route(
  { role: "requester", params: BatchParams, body: PlanUploadsInput },
  async ({ actor, params, body }) =>
    ok({ plans: await planUploads({ actor, nowMs: nowMs(), ...params, ...body }) }),
);
