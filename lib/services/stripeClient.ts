import type Stripe from "stripe";
import { env } from "@/lib/env";
import { createStripeClient } from "./stripe";

let client: Stripe | undefined;

/** The Stripe SDK, pointed at the configured address. */
export function stripe(): Stripe {
  const { STRIPE_SECRET_KEY: secretKey, STRIPE_API_BASE: apiBase } = env();
  return (client ??= createStripeClient({ secretKey, apiBase }));
}

/** Makes `other` the process's client: the simulation puts the product in front of a stand-in of its own. */
export function setStripe(other: Stripe): void {
  client = other;
}
