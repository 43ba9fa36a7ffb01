import { getDb } from "@/db/client";
import { DisputeParams } from "@/lib/contracts/work";
import { AppError } from "@/lib/errors";
import { route } from "@/lib/http/route";
import { findEvidence } from "@/lib/market/disputes/evidence";

/** The frozen evidence, byte for byte: its SHA-256 is the one that the dispute shows. */
export const GET = route({ role: "admin", params: DisputeParams }, ({ params }) => {
  const evidence = findEvidence(getDb(), params.disputeId);
  if (!evidence) throw new AppError("not_found", "There is no such dispute.");
  return new Response(evidence.text, {
    headers: {
      "content-type": "application/json; charset=utf-8",
      "content-disposition": `attachment; filename="evidence-${params.disputeId}.json"`,
      "cache-control": "private, no-store",
    },
  });
});
