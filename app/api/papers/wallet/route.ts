import { nowMs } from "@/lib/clock";
import { WalletPaperQuery } from "@/lib/contracts/papers";
import { pdfResponse } from "@/lib/http/pdf";
import { route } from "@/lib/http/route";
import { walletPdf } from "@/lib/market/money/statements";

/** A team's wallet statement of a month or a year. */
export const GET = route(
  { role: "requester", query: WalletPaperQuery },
  async ({ actor, query: { teamId, year, month } }) =>
    pdfResponse(await walletPdf({ actor, nowMs: nowMs(), teamId, year, ...(month && { month }) })),
);
