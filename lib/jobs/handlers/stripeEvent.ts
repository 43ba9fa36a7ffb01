import { processStripeEvent } from "@/lib/market/money/stripeEvents";
import type { Handler } from "./index";

export const stripeEventJob: Handler<"stripe.event"> = ({ eventId }, { nowMs }) =>
  processStripeEvent({ eventId, nowMs: nowMs() });
