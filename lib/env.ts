import { z } from "zod";

const LOOPBACK = "http://127.0.0.1";

const EnvSchema = z.object({
  APP_URL: z.url().default(`${LOOPBACK}:3000`),
  DATABASE_FILE: z.string().min(1).default(".demo/merestone.sqlite"),
  AUTH_SECRET: z.string().min(32).default("local-demo-secret-do-not-use-elsewhere"),
  S3_ENDPOINT: z.url().default(`${LOOPBACK}:3901`),
  S3_REGION: z.string().default("us-east-1"),
  S3_BUCKET: z.string().default("merestone"),
  S3_ACCESS_KEY_ID: z.string().default("AKIALOCALDEMO0000000"),
  S3_SECRET_ACCESS_KEY: z.string().default("local-demo-secret-access-key"),
  STRIPE_SECRET_KEY: z.string().default("sk_test_localdemo"),
  STRIPE_API_BASE: z.url().default(`${LOOPBACK}:3902`),
  STRIPE_WEBHOOK_SECRET: z.string().default("whsec_bG9jYWwtZGVtby13ZWJob29rLXNlY3JldA"),
  RESEND_API_KEY: z.string().default("re_localdemo"),
  RESEND_BASE_URL: z.url().default(`${LOOPBACK}:3903`),
  MAIL_FROM: z.string().default("Merestone <post@merestone.example>"),
  /** "1" in the demo: shows the local stand-ins' links (mailbox) and the demo accounts. */
  MERESTONE_DEMO: z.enum(["0", "1"]).default("0"),
  /** Handed-in work is paid within so many hours, even where its consensus still waits for people. */
  SETTLE_WITHIN_HOURS: z.coerce.number().min(1).default(72),
  /** From so many cents at stake a dispute is decided by two admins: one proposes, another confirms. */
  DISPUTE_TWO_ADMINS_CENTS: z.coerce.number().int().min(1).default(1000),
  LOG_LEVEL: z.enum(["debug", "info", "warn", "error", "silent"]).default("info"),
});

export type Env = z.infer<typeof EnvSchema>;

let cached: Env | undefined;

/** The environment, read and checked once. Throws with every wrong variable named. */
export function env(): Env {
  if (cached) return cached;
  const parsed = EnvSchema.safeParse(process.env);
  if (!parsed.success) throw new Error(`Environment is not usable:\n${z.prettifyError(parsed.error)}`);
  const local = /^https?:\/\/(127\.0\.0\.1|localhost|\[::1\])(:|\/|$)/.test(parsed.data.APP_URL);
  if (!local && parsed.data.AUTH_SECRET.startsWith("local-demo")) {
    throw new Error("AUTH_SECRET must be set to a secret of your own when APP_URL is not this machine.");
  }
  cached = parsed.data;
  return cached;
}
