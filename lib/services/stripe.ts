import Stripe from "stripe";

export type StripeConfig = {
  secretKey: string;
  apiBase: string;
  maxNetworkRetries?: number;
  timeoutMs?: number;
};

/** The Stripe SDK, pointed at an address. It retries a lost connection under the same idempotency key. */
export function createStripeClient({
  secretKey,
  apiBase,
  maxNetworkRetries = 2,
  timeoutMs = 20_000,
}: StripeConfig): Stripe {
  const { protocol, hostname, port } = new URL(apiBase);
  const isSecure = protocol === "https:";
  return new Stripe(secretKey, {
    host: hostname,
    port: port || (isSecure ? "443" : "80"),
    protocol: isSecure ? "https" : "http",
    maxNetworkRetries,
    timeout: timeoutMs,
    telemetry: false,
  });
}
