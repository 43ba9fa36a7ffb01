import { z } from "zod";
import { route } from "@/lib/http/route";
import { openRelease } from "@/lib/market/releases/openRelease";

/** The dataset release as one zip file. */
export const GET = route(
  { role: ["requester", "admin"], params: z.object({ releaseId: z.string().min(5).max(40) }) },
  async ({ actor, params }) => {
    const { stream, byteSize, fileName, sha256 } = await openRelease({ actor, ...params });
    return new Response(stream, {
      headers: {
        "content-type": "application/zip",
        "content-disposition": `attachment; filename="${fileName}"`,
        ...(byteSize !== null && { "content-length": String(byteSize) }),
        "repr-digest": `sha-256=:${Buffer.from(sha256, "hex").toString("base64")}:`, // RFC 9530
        "cache-control": "private, no-store",
      },
    });
  },
);
