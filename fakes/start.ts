import { startResend } from "./resend";
import { startS3 } from "./s3";
import { startStripe } from "./stripe";

const setting = (name: string, fallback: string) => process.env[name] ?? fallback;

/** Starts the three stand-ins on loopback. Says "ready" in one JSON line each. */
async function main(): Promise<void> {
  const folder = setting("FAKES_DIR", ".demo/fakes");
  const say = (service: string, port: number) => console.log(JSON.stringify({ ready: service, port }));
  const ports = { s3: Number(setting("S3_PORT", "3901")), stripe: Number(setting("STRIPE_PORT", "3902")), resend: Number(setting("RESEND_PORT", "3903")) };
  const servers = [
    await startS3({
      port: ports.s3,
      folder,
      region: setting("S3_REGION", "us-east-1"),
      accessKeyId: setting("S3_ACCESS_KEY_ID", "AKIALOCALDEMO0000000"),
      secretAccessKey: setting("S3_SECRET_ACCESS_KEY", "local-demo-secret-access-key"),
    }),
    await startStripe({
      port: ports.stripe,
      folder,
      webhookUrl: process.env.STRIPE_WEBHOOK_URL ?? null,
      webhookSecret: setting("STRIPE_WEBHOOK_SECRET", "whsec_bG9jYWwtZGVtby13ZWJob29rLXNlY3JldA"),
    }),
    await startResend({ port: ports.resend, folder }),
  ];
  for (const [service, port] of Object.entries(ports)) say(service, port);
  const stop = () => {
    for (const server of servers) server.close();
    setTimeout(() => process.exit(0), 200).unref();
  };
  process.on("SIGTERM", stop);
  process.on("SIGINT", stop);
}

main().catch((error: unknown) => {
  console.error(error);
  process.exit(1);
});
