import { z } from "zod";
import { ImageParams } from "@/lib/contracts/batches";
import { route } from "@/lib/http/route";
import { openImage } from "@/lib/market/images/openImage";

const Params = ImageParams.extend({ variant: z.enum(["working", "thumb"]) });

/** The upright working copy or the thumbnail, to whoever may see the image. */
export const GET = route({ role: "any", params: Params }, async ({ actor, params }) => {
  const { stream, byteSize, mediaType } = await openImage({ actor, ...params });
  return new Response(stream, {
    headers: {
      "content-type": mediaType,
      ...(byteSize !== undefined && { "content-length": String(byteSize) }),
      // The copy of an image never changes; "private", because who may see it is checked here.
      "cache-control": "private, max-age=86400, immutable",
      "x-content-type-options": "nosniff",
    },
  });
});
