import { nowMs } from "@/lib/clock";
import { InvoiceQuery } from "@/lib/contracts/papers";
import { pdfResponse } from "@/lib/http/pdf";
import { route } from "@/lib/http/route";
import { invoicePdf } from "@/lib/market/money/statements";

/** The invoice of one batch. */
export const GET = route({ role: "requester", query: InvoiceQuery }, async ({ actor, query }) =>
  pdfResponse(await invoicePdf({ actor, nowMs: nowMs(), ...query })),
);
