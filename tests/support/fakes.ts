import { mkdtempSync, readFileSync, rmSync, existsSync } from "node:fs";
import os from "node:os";
import path from "node:path";
import { http } from "msw";
import { setupServer, type SetupServer } from "msw/node";
import { vi } from "vitest";
import { startAll, type Fakes, type FakesOptions } from "@/fakes/index";
import { fromRequest, type Core } from "@/fakes/shared/transport";
import { createResendClient } from "@/lib/services/resend";
import { createS3Client, createS3Presigner } from "@/lib/services/s3";
import { createStripeClient } from "@/lib/services/stripe";

export const S3_KEYS = {
  accessKeyId: "AKIAINTESTS000000000",
  secretAccessKey: "secret-of-the-tests",
  region: "us-east-1",
};
export const STRIPE_KEY = "sk_test_tests";
export const RESEND_KEY = "re_tests";
export const WEBHOOK_SECRET = "whsec_tests";

export type TestFakes = Fakes & {
  folder: string;
  restart: () => Promise<TestFakes>;
  remove: () => Promise<void>;
};

/** The three stand-ins on free ports, in a folder of their own. `remove` stops them and deletes it. */
export async function startTestFakes(options: Partial<FakesOptions> = {}): Promise<TestFakes> {
  const folder = options.folder ?? mkdtempSync(path.join(os.tmpdir(), "merestone-fakes-"));
  const fakes = await startAll({
    s3: S3_KEYS,
    ...options,
    folder,
    stripe: { secretKey: STRIPE_KEY, webhookSecret: WEBHOOK_SECRET, payoutStepMs: 20, ...options.stripe },
    resend: { apiKey: RESEND_KEY, ...options.resend },
  });
  return {
    ...fakes,
    folder,
    restart: async () => {
      await fakes.close();
      const { s3, stripe, resend } = fakes;
      return startTestFakes({
        ...options,
        folder,
        ports: { s3: s3.port, stripe: stripe.port, resend: resend.port },
      });
    },
    remove: async () => {
      await fakes.close();
      rmSync(folder, { recursive: true, force: true });
    },
  };
}

export const s3ConfigOf = ({ s3 }: Fakes) => ({ endpoint: s3.url, ...S3_KEYS });

/** The SDKs as the product configures them, in front of the stand-ins. */
export function clientsOf(fakes: Fakes) {
  return {
    s3: createS3Client(s3ConfigOf(fakes)),
    presigner: createS3Presigner(s3ConfigOf(fakes)),
    stripe: createStripeClient({ secretKey: STRIPE_KEY, apiBase: fakes.stripe.url, maxNetworkRetries: 0 }),
    resend: createResendClient({ apiKey: RESEND_KEY, baseUrl: fakes.resend.url }),
  };
}

/** Posts to a control endpoint; throws with the answer when it was refused. */
export async function control(
  served: { url: string },
  verb: string,
  input: Record<string, unknown> = {},
): Promise<Record<string, unknown>> {
  const answer = await fetch(`${served.url}/_control/${verb}`, {
    method: "POST",
    headers: { "content-type": "application/json" },
    body: JSON.stringify(input),
  });
  const body = (await answer.json()) as Record<string, unknown>;
  if (!answer.ok) throw new Error(`${verb} answered ${answer.status}: ${JSON.stringify(body)}`);
  return body;
}

/** Puts cores in the place of hosts, inside this process: `interceptHosts({ "https://api.resend.com": core })`. */
export function interceptHosts(cores: Record<string, Core>): SetupServer {
  return setupServer(
    ...Object.entries(cores).map(([origin, core]) => http.all(`${origin}/*`, fromRequest(core))),
  );
}

/** A file of the shared check values; undefined, with the reason printed, where they are absent. */
export function sharedGolden(name: string): string | undefined {
  const file = path.resolve(import.meta.dirname, "../../../shared/golden", name);
  if (existsSync(file)) return readFileSync(file, "utf8");
  console.warn(`skipped: the shared check values (${name}) are not on this machine`);
  return undefined;
}

/** Waits until the condition holds. */
export async function eventually<T>(
  find: () => T | undefined | false | Promise<T | undefined | false>,
  timeoutMs = 5000,
): Promise<T> {
  const deadline = Date.now() + timeoutMs;
  for (;;) {
    const found = await find();
    if (found) return found;
    if (Date.now() > deadline) throw new Error("it did not come about in time");
    await new Promise((resolve) => setTimeout(resolve, 10));
  }
}

/** Lets the product's own object store (lib/services/store) talk to these stand-ins, for the rest of the test file. */
export function pointStoreAt(fakes: TestFakes): void {
  vi.stubEnv("S3_ENDPOINT", fakes.s3.url);
  vi.stubEnv("S3_REGION", S3_KEYS.region);
  vi.stubEnv("S3_ACCESS_KEY_ID", S3_KEYS.accessKeyId);
  vi.stubEnv("S3_SECRET_ACCESS_KEY", S3_KEYS.secretAccessKey);
}
