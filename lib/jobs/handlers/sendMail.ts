import type { Resend } from "resend";
import { env } from "@/lib/env";
import { createResendClient } from "@/lib/services/resend";
import { JobRefused } from "../refused";
import type { Handler } from "./index";

let client: Resend | undefined;

/**
 * Sends one letter. The idempotency key is the job's, so that another attempt sends nothing twice, and two
 * letters of the same words (two payouts of one amount) are two letters.
 */
export const sendMailJob: Handler<"mail.send"> = async ({ to, subject, html, text, tag }, { jobId }) => {
  client ??= createResendClient({ apiKey: env().RESEND_API_KEY, baseUrl: env().RESEND_BASE_URL });
  const { error } = await client.emails.send(
    { from: env().MAIL_FROM, to, subject, html, text, tags: [{ name: "kind", value: tag }] },
    { idempotencyKey: `letter:${jobId}` },
  );
  if (!error) return;
  const isOurs = ["missing_required_field", "validation_error", "invalid_idempotent_request"].includes(
    error.name,
  );
  throw new (isOurs ? JobRefused : Error)(`mail to ${to} was not taken: ${error.name}: ${error.message}`);
};
