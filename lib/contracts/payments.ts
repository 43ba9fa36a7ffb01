import { z } from "zod";

/** An annotator's choice of when to be paid without asking. Weekdays are ISO 8601, 1 Monday to 7 Sunday. */
export const PayoutScheduleInput = z.object({
  rhythm: z.enum(["never", "weekly", "monthly"]),
  weekday: z.coerce.number().int().min(1).max(7),
  leastCents: z.coerce
    .number("An amount, please.")
    .int()
    .min(100, "A payout starts at $1.00.")
    .max(1_000_000, "$10,000 at most."),
});
export type PayoutScheduleInput = z.output<typeof PayoutScheduleInput>;
