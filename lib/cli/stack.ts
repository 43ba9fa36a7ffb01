import { spawn, type ChildProcess } from "node:child_process";
import { createHash } from "node:crypto";
import { existsSync, mkdirSync, readdirSync, readFileSync, statSync, writeFileSync } from "node:fs";
import net from "node:net";
import path from "node:path";
import { setTimeout as sleep } from "node:timers/promises";

const ROOT = process.cwd();

/** Ports and folder of one running copy of the product. Several can run beside each other (tests do). */
export type StackPlan = {
  webPort: number;
  s3Port: number;
  stripePort: number;
  resendPort: number;
  /** Holds the database, the stand-ins' state and the logs. */
  folder: string;
  demo: boolean;
};

/** The environment that wires web, worker and stand-ins of one plan together. */
export function stackEnv(plan: StackPlan): NodeJS.ProcessEnv {
  const at = (port: number) => `http://127.0.0.1:${port}`;
  return {
    ...process.env,
    NODE_ENV: "production",
    NEXT_TELEMETRY_DISABLED: "1",
    AWS_SDK_JS_NODE_VERSION_SUPPORT_WARNING_DISABLED: "true",
    MERESTONE_DEMO: plan.demo ? "1" : "0",
    APP_URL: at(plan.webPort),
    NEXTAUTH_URL: at(plan.webPort),
    NEXTAUTH_SECRET: process.env.AUTH_SECRET ?? "local-demo-secret-do-not-use-elsewhere",
    DATABASE_FILE: path.join(plan.folder, "merestone.sqlite"),
    FAKES_DIR: path.join(plan.folder, "fakes"),
    S3_PORT: String(plan.s3Port),
    STRIPE_PORT: String(plan.stripePort),
    RESEND_PORT: String(plan.resendPort),
    S3_ENDPOINT: at(plan.s3Port),
    STRIPE_API_BASE: at(plan.stripePort),
    RESEND_BASE_URL: at(plan.resendPort),
    STRIPE_WEBHOOK_URL: `${at(plan.webPort)}/api/stripe/webhook`,
    STRIPE_WEBHOOK_SECRET: process.env.STRIPE_WEBHOOK_SECRET ?? "whsec_bG9jYWwtZGVtby13ZWJob29rLXNlY3JldA",
  };
}

const SOURCES = [
  "app",
  "components",
  "lib",
  "db",
  "fonts",
  "public",
  "next.config.mjs",
  "tailwind.config.ts",
  "package-lock.json",
  "tsconfig.json",
  "postcss.config.mjs",
];

/** SHA-256 over the names and bytes of everything that the build reads. */
export function sourcesHash(): string {
  const hash = createHash("sha256");
  const walk = (name: string) => {
    const full = path.join(ROOT, name);
    if (!existsSync(full)) return;
    if (statSync(full).isDirectory()) {
      for (const entry of readdirSync(full).sort()) walk(path.join(name, entry));
    } else {
      hash.update(name).update("\0").update(readFileSync(full));
    }
  };
  for (const name of SOURCES) walk(name);
  return hash.digest("hex");
}

/** Builds the web application unless the last build is of these very sources. */
export async function ensureBuilt(say: (line: string) => void): Promise<void> {
  const stamp = path.join(ROOT, ".next", "merestone-sources");
  const wanted = sourcesHash();
  const isFresh =
    existsSync(path.join(ROOT, ".next", "BUILD_ID")) &&
    existsSync(stamp) &&
    readFileSync(stamp, "utf8") === wanted;
  if (isFresh) return;
  say("Building (about half a minute) ...");
  await runToEnd(
    "node",
    ["node_modules/next/dist/bin/next", "build"],
    { ...process.env, NODE_ENV: "production", NEXT_TELEMETRY_DISABLED: "1" },
    path.join(ROOT, ".next", "build.log"),
  );
  writeFileSync(stamp, wanted);
}

/** Runs a command to its end, telling each line of its output; throws with the last ones when it fails. */
export async function runToEnd(
  command: string,
  args: string[],
  environment: NodeJS.ProcessEnv,
  logFile?: string,
  tell?: (line: string) => void,
): Promise<void> {
  const child = spawn(command, args, { cwd: ROOT, env: environment, stdio: ["ignore", "pipe", "pipe"] });
  let output = "";
  child.stdout.on("data", (chunk: Buffer) => {
    output += chunk.toString();
    for (const line of chunk.toString().trimEnd().split("\n")) tell?.(`  ${line}`);
  });
  child.stderr.on("data", (chunk: Buffer) => (output += chunk.toString()));
  const code = await new Promise<number | null>((resolve) => child.on("close", resolve));
  if (logFile) {
    mkdirSync(path.dirname(logFile), { recursive: true });
    writeFileSync(logFile, output);
  }
  if (code !== 0)
    throw new Error(
      `${command} ${args.join(" ")} ended with ${code}:\n${output.split("\n").slice(-40).join("\n")}`,
    );
}

export type Part = { name: string; process: ChildProcess };

/** Starts a TypeScript entry as a child of its own, its output in `folder`/logs/`name`.log. */
export function startPart(
  name: string,
  args: string[],
  plan: StackPlan,
  extra: Partial<NodeJS.ProcessEnv> = {},
): Part {
  const logs = path.join(plan.folder, "logs");
  mkdirSync(logs, { recursive: true });
  const child = spawn("node", args, {
    cwd: ROOT,
    env: { ...stackEnv(plan), ...extra },
    stdio: ["ignore", "pipe", "pipe"],
  });
  const file = path.join(logs, `${name}.log`);
  writeFileSync(file, "", { flag: "a" });
  const append = (chunk: Buffer) => writeFileSync(file, chunk, { flag: "a" });
  child.stdout?.on("data", append);
  child.stderr?.on("data", append);
  return { name, process: child };
}

export const startFakes = (plan: StackPlan) =>
  startPart("fakes", ["--import", "tsx", "fakes/start.ts"], plan);
export const startWorker = (plan: StackPlan) =>
  startPart("worker", ["--import", "tsx", "lib/cli/worker.ts"], plan);
export const startWeb = (plan: StackPlan) =>
  startPart(
    "web",
    ["node_modules/next/dist/bin/next", "start", "-H", "127.0.0.1", "-p", String(plan.webPort)],
    plan,
  );

/** Waits until the address answers with any HTTP status below 500. */
export async function waitFor(url: string, part: Part, timeoutMs = 30_000): Promise<void> {
  const deadline = Date.now() + timeoutMs;
  while (Date.now() < deadline) {
    if (part.process.exitCode !== null)
      throw new Error(`${part.name} ended with ${part.process.exitCode}; see its log`);
    const answer = await fetch(url).catch(() => null);
    if (answer && answer.status < 500) return;
    await sleep(100);
  }
  throw new Error(`${part.name} does not answer at ${url}`);
}

/** Asks each part to stop, and ends what has not stopped after eight seconds. */
export async function stopParts(parts: Part[]): Promise<void> {
  const live = parts.filter((part) => part.process.exitCode === null && part.process.signalCode === null);
  const gone = live.map((part) => new Promise<void>((resolve) => part.process.once("exit", () => resolve())));
  for (const part of live) part.process.kill("SIGTERM");
  await Promise.race([Promise.all(gone), sleep(8000)]);
  for (const part of live)
    if (part.process.exitCode === null && part.process.signalCode === null) part.process.kill("SIGKILL");
}

/** Whether something listens on a loopback port. */
export function isPortTaken(port: number): Promise<boolean> {
  return new Promise((resolve) => {
    const probe = net.connect({ host: "127.0.0.1", port });
    probe.once("connect", () => {
      probe.destroy();
      resolve(true);
    });
    probe.once("error", () => resolve(false));
  });
}

/** A port that is free at this moment. */
export function freePort(): Promise<number> {
  return new Promise((resolve, reject) => {
    const server = net.createServer();
    server.once("error", reject);
    server.listen(0, "127.0.0.1", () => {
      const address = server.address();
      const port = typeof address === "object" && address ? address.port : 0;
      server.close(() => resolve(port));
    });
  });
}
