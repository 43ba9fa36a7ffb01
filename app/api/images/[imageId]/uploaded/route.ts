import { nowMs } from "@/lib/clock";
import { ImageParams, UploadedInput } from "@/lib/contracts/batches";
import { ok, route } from "@/lib/http/route";
import { completeUpload } from "@/lib/market/images/completeUpload";

/** The browser says that the file has arrived in the object store. */
export const POST = route(
  { role: "requester", params: ImageParams, body: UploadedInput },
  async ({ actor, params, body }) => {
    await completeUpload({ actor, nowMs: nowMs(), ...params, ...body });
    return ok({});
  },
);
