import Stripe from "stripe";
import { env } from "@/lib/env";

let client: Stripe | undefined;

/** The Stripe SDK, pointed at the configured address. */
export function stripe(): Stripe {
  if (client) return client;
  const { STRIPE_SECRET_KEY, STRIPE_API_BASE } = env();
  const base = new URL(STRIPE_API_BASE);
  client = new Stripe(STRIPE_SECRET_KEY, {
    host: base.hostname,
    port: base.port || (base.protocol === "https:" ? "443" : "80"),
    protocol: base.protocol === "https:" ? "https" : "http",
    maxNetworkRetries: 2,
    timeout: 20_000,
    telemetry: false,
  });
  return client;
}
