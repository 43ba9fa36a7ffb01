import { nowMs } from "@/lib/clock";
import { PeriodQuery } from "@/lib/contracts/papers";
import { pdfResponse } from "@/lib/http/pdf";
import { route } from "@/lib/http/route";
import { earningsPdf } from "@/lib/market/money/statements";

/** An annotator's statement of a month or a year. */
export const GET = route(
  { role: "annotator", query: PeriodQuery },
  async ({ actor, query: { year, month } }) =>
    pdfResponse(await earningsPdf({ actor, nowMs: nowMs(), year, ...(month && { month }) })),
);
