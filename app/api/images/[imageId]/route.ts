import { ImageParams } from "@/lib/contracts/batches";
import { ok, route } from "@/lib/http/route";
import { removeImage } from "@/lib/market/images/removeImage";

/** Takes an image out of a draft. */
export const DELETE = route({ role: "requester", params: ImageParams }, async ({ actor, params }) => {
  await removeImage({ actor, ...params });
  return ok({});
});
