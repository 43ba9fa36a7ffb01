import { z } from "zod";

const Year = z.coerce.number().int().min(2020).max(2200);
const Month = z.coerce.number().int().min(1).max(12);

/** A month, or a year when the month is left out. */
export const PeriodQuery = z.object({ year: Year, month: Month.optional() });
export const WalletPaperQuery = PeriodQuery.extend({ teamId: z.string().min(5).max(40) });
export const ReceiptQuery = z.object({ topUpId: z.string().min(5).max(40) });
export const InvoiceQuery = z.object({ batchId: z.string().min(5).max(40) });
