import { nowMs } from "@/lib/clock";
import { ReceiptQuery } from "@/lib/contracts/papers";
import { pdfResponse } from "@/lib/http/pdf";
import { route } from "@/lib/http/route";
import { receiptPdf } from "@/lib/market/money/statements";

/** The receipt of one card payment. */
export const GET = route({ role: "requester", query: ReceiptQuery }, async ({ actor, query }) =>
  pdfResponse(await receiptPdf({ actor, nowMs: nowMs(), ...query })),
);
