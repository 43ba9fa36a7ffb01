import { createHash } from "node:crypto";
import { Resend } from "resend";
import { env } from "@/lib/env";
import { JobRefused } from "../refused";
import type { Handler } from "./index";

let client: Resend | undefined;

/** Sends one letter. The idempotency key is the letter's own hash, so a repeated attempt sends nothing twice. */
export const sendMailJob: Handler<"mail.send"> = async ({ to, subject, html, text, tag }) => {
  // The SDK reads its address from the environment when it is made.
  process.env.RESEND_BASE_URL = env().RESEND_BASE_URL;
  client ??= new Resend(env().RESEND_API_KEY);
  const idempotencyKey = createHash("sha256")
    .update(JSON.stringify([to, subject, html]))
    .digest("hex");
  const { error } = await client.emails.send(
    { from: env().MAIL_FROM, to, subject, html, text, tags: [{ name: "kind", value: tag }] },
    { idempotencyKey },
  );
  if (!error) return;
  const isOurs = ["missing_required_field", "validation_error", "invalid_idempotent_request"].includes(
    error.name,
  );
  throw new (isOurs ? JobRefused : Error)(`mail to ${to} was not taken: ${error.name}: ${error.message}`);
};
