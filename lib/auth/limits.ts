import { RateLimiterMemory } from "rate-limiter-flexible";
import { AppError } from "@/lib/errors";

const LIMITS = {
  "sign-in": new RateLimiterMemory({ points: 10, duration: 300 }),
  mail: new RateLimiterMemory({ points: 6, duration: 900 }),
} as const;

/** Counts one use of `what` by `who`; throws rate_limited with the wait in words when it was the last. */
export async function spendAllowance(what: keyof typeof LIMITS, who: string): Promise<void> {
  try {
    await LIMITS[what].consume(who);
  } catch (refusal) {
    const waitMs = (refusal as { msBeforeNext?: number }).msBeforeNext ?? 60_000;
    throw new AppError(
      "rate_limited",
      `Too many tries. Wait ${Math.ceil(waitMs / 60_000)} min and try again.`,
    );
  }
}
