import { Resend } from "resend";

export type ResendConfig = { apiKey: string; baseUrl: string };

/** The Resend SDK, pointed at an address. It never throws: each call resolves to `{ data, error }`. */
export function createResendClient({ apiKey, baseUrl }: ResendConfig): Resend {
  return new Resend(apiKey, { baseUrl });
}
