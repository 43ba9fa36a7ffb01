import type Stripe from "stripe";
import { env } from "@/lib/env";
import { createStripeClient } from "./stripe";

let client: Stripe | undefined;

/** The Stripe SDK, pointed at the configured address. */
export function stripe(): Stripe {
  const { STRIPE_SECRET_KEY: secretKey, STRIPE_API_BASE: apiBase } = env();
  return (client ??= createStripeClient({ secretKey, apiBase }));
}
