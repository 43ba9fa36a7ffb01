import { startAll } from "./index";

const setting = (name: string, fallback: string): string => process.env[name] ?? fallback;
const milliseconds = (name: string): number | undefined =>
  process.env[name] === undefined ? undefined : Number(process.env[name]);

/** Starts the three stand-ins on loopback. Says "ready" in one JSON line each; SIGTERM writes and ends. */
async function main(): Promise<void> {
  const settleMs = milliseconds("STRIPE_SETTLE_MS");
  const payoutStepMs = milliseconds("STRIPE_PAYOUT_STEP_MS");
  const fakes = await startAll({
    folder: setting("FAKES_DIR", ".demo/fakes"),
    ports: {
      s3: Number(setting("S3_PORT", "3901")),
      stripe: Number(setting("STRIPE_PORT", "3902")),
      resend: Number(setting("RESEND_PORT", "3903")),
    },
    s3: {
      region: setting("S3_REGION", "us-east-1"),
      accessKeyId: setting("S3_ACCESS_KEY_ID", "AKIALOCALDEMO0000000"),
      secretAccessKey: setting("S3_SECRET_ACCESS_KEY", "local-demo-secret-access-key"),
    },
    stripe: {
      secretKey: process.env.STRIPE_SECRET_KEY,
      webhookUrl: process.env.STRIPE_WEBHOOK_URL,
      webhookSecret: setting("STRIPE_WEBHOOK_SECRET", "whsec_bG9jYWwtZGVtby13ZWJob29rLXNlY3JldA"),
      ...(settleMs !== undefined && { settleMs }),
      ...(payoutStepMs !== undefined && { payoutStepMs }),
    },
    resend: {
      apiKey: process.env.RESEND_API_KEY,
      webhookUrl: process.env.RESEND_WEBHOOK_URL,
      webhookSecret: process.env.RESEND_WEBHOOK_SECRET,
    },
  });
  let isStopping = false;
  const stop = (): void => {
    if (isStopping) return;
    isStopping = true;
    fakes.close().then(
      () => process.exit(0),
      (error: unknown) => {
        console.error(error);
        process.exit(1);
      },
    );
  };
  process.on("SIGTERM", stop);
  process.on("SIGINT", stop);
  for (const service of ["s3", "stripe", "resend"] as const)
    console.log(JSON.stringify({ ready: service, port: fakes[service].port, url: fakes[service].url }));
}

main().catch((error: unknown) => {
  console.error(error instanceof Error ? error.message : error);
  process.exit(1);
});
