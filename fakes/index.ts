import { mkdirSync } from "node:fs";
import path from "node:path";
import { createResend, type ResendService } from "./resend/service";
import { createS3, type S3Service } from "./s3/service";
import { refuseProduction, serve, type Core, type Served } from "./shared/transport";
import { createStripe, type StripeService } from "./stripe/service";
import type { Settings } from "./stripe/world";

export type FakesOptions = {
  /** Keeps objects, payments and mail. */
  folder: string;
  ports?: { s3?: number; stripe?: number; resend?: number };
  s3: { accessKeyId: string; secretAccessKey: string; region: string };
  stripe?: {
    webhookUrl?: string | undefined;
    webhookSecret?: string | undefined;
    secretKey?: string | undefined;
  } & Partial<Settings>;
  resend?: {
    apiKey?: string | undefined;
    webhookUrl?: string | undefined;
    webhookSecret?: string | undefined;
  };
};

export type Fakes = {
  s3: Served & { service: S3Service };
  stripe: Served & { service: StripeService };
  resend: Served & { service: ResendService };
  /** Stops listening and writes what is not yet written. */
  close: () => Promise<void>;
};

/** Starts the stand-ins for S3, Stripe and Resend on loopback. A port that is left out is any free one. */
export async function startAll({
  folder,
  ports = {},
  s3,
  stripe = {},
  resend = {},
}: FakesOptions): Promise<Fakes> {
  refuseProduction();
  const root = path.resolve(folder);
  mkdirSync(root, { recursive: true });
  const services = {
    s3: createS3({ ...s3, folder: path.join(root, "s3") }),
    stripe: createStripe({ ...stripe, folder: root }),
    resend: createResend({ ...resend, folder: root }),
  };
  const open: Served[] = [];
  const start = async (core: Core, port: number | undefined): Promise<Served> => {
    const served = await serve(core, port);
    open.push(served);
    return served;
  };
  const close = async (): Promise<void> => {
    await Promise.all(open.map((served) => served.close()));
    for (const service of Object.values(services)) service.close();
  };
  try {
    const [atS3, atStripe, atResend] = [
      await start(services.s3.core, ports.s3),
      await start(services.stripe.core, ports.stripe),
      await start(services.resend.core, ports.resend),
    ];
    services.stripe.setBaseUrl(atStripe.url);
    return {
      s3: { ...atS3, service: services.s3 },
      stripe: { ...atStripe, service: services.stripe },
      resend: { ...atResend, service: services.resend },
      close,
    };
  } catch (error) {
    await close();
    throw error;
  }
}
