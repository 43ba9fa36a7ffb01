import { spawn, type ChildProcess } from "node:child_process";
import { mkdtempSync, rmSync } from "node:fs";
import os from "node:os";
import path from "node:path";
import { afterEach, expect, it, vi } from "vitest";
import { createResendClient } from "@/lib/services/resend";
import { createStripeClient } from "@/lib/services/stripe";
import { control } from "@/tests/support/fakes";

// Each test starts processes, which takes seconds on a busy machine.
vi.setConfig({ testTimeout: 120_000 });

const ROOT = path.resolve(import.meta.dirname, "../../..");
const folders: string[] = [];
const children: ChildProcess[] = [];
afterEach(() => {
  for (const child of children.splice(0)) child.kill("SIGKILL");
  for (const folder of folders.splice(0)) rmSync(folder, { recursive: true, force: true });
});

function newFolder(): string {
  const folder = mkdtempSync(path.join(os.tmpdir(), "merestone-start-"));
  folders.push(folder);
  return folder;
}

type Started = {
  child: ChildProcess;
  urls: Record<string, string>;
  ended: Promise<number | null>;
  output: () => string;
};

/** Starts the entry as the demo does, and waits for its three lines, or for its end. */
async function start(folder: string, extra: Record<string, string> = {}): Promise<Started> {
  const child = spawn("node", ["--import", "tsx", "fakes/start.ts"], {
    cwd: ROOT,
    env: {
      ...process.env,
      NODE_ENV: "test",
      FAKES_DIR: folder,
      S3_PORT: "0",
      STRIPE_PORT: "0",
      RESEND_PORT: "0",
      STRIPE_SECRET_KEY: "sk_test_start",
      RESEND_API_KEY: "re_start",
      ...extra,
    },
  });
  children.push(child);
  let output = "";
  child.stdout.on("data", (chunk: Buffer) => (output += chunk.toString()));
  child.stderr.on("data", (chunk: Buffer) => (output += chunk.toString()));
  const ended = new Promise<number | null>((resolve) => child.once("exit", (code) => resolve(code)));
  const ready = (async () => {
    while (output.split("\n").filter((line) => line.startsWith("{")).length < 3)
      await new Promise((resolve) => setTimeout(resolve, 20));
  })();
  await Promise.race([ready, ended]);
  const lines = output.split("\n").filter((line) => line.startsWith('{"ready"'));
  const urls = Object.fromEntries(
    lines
      .map((line) => JSON.parse(line) as { ready: string; url: string })
      .map(({ ready: name, url }) => [name, url]),
  );
  return { child, urls, ended, output: () => output };
}

it("says ready, keeps everything through a kill, and ends on SIGTERM", async () => {
  const folder = newFolder();
  const first = await start(folder);
  expect(Object.keys(first.urls)).toEqual(["s3", "stripe", "resend"]);
  const clients = ({ urls }: Started) => ({
    stripe: createStripeClient({
      secretKey: "sk_test_start",
      apiBase: urls.stripe ?? "",
      maxNetworkRetries: 0,
    }),
    resend: createResendClient({ apiKey: "re_start", baseUrl: urls.resend ?? "" }),
  });
  const { stripe, resend } = clients(first);
  const made = await stripe.paymentIntents.create(
    { amount: 5000, currency: "usd", payment_method: "pm_card_visa", confirm: true },
    { idempotencyKey: "k" },
  );
  const { data } = await resend.emails.send({
    from: "a@example.com",
    to: "b@example.com",
    subject: "Kept",
    text: "kept",
  });
  first.child.kill("SIGKILL");
  await first.ended;

  const second = await start(folder);
  const again = clients(second);
  expect(
    (
      await again.stripe.paymentIntents.create(
        { amount: 5000, currency: "usd", payment_method: "pm_card_visa", confirm: true },
        { idempotencyKey: "k" },
      )
    ).id,
  ).toBe(made.id);
  // The demo has no waiting time: what is paid may be paid out.
  expect((await again.stripe.balance.retrieve()).available[0]?.amount).toBe(5000 - 175);
  expect((await again.resend.emails.get(data?.id ?? "")).data?.subject).toBe("Kept");
  expect((await control({ url: second.urls.stripe ?? "" }, "audit")).accounts).toMatchObject([
    { balance: 4825, sum: 4825 },
  ]);
  second.child.kill("SIGTERM");
  expect(await second.ended).toBe(0);
});

it("does not start in production unless the demo is meant", async () => {
  const refused = await start(newFolder(), { NODE_ENV: "production", MERESTONE_DEMO: "0" });
  expect(await refused.ended).toBe(1);
  expect(refused.output()).toContain("MERESTONE_DEMO=1");
  const meant = await start(newFolder(), { NODE_ENV: "production", MERESTONE_DEMO: "1" });
  expect(Object.keys(meant.urls)).toHaveLength(3);
});
