import { existsSync, mkdirSync, rmSync, writeFileSync } from "node:fs";
import path from "node:path";
import {
  ensureBuilt,
  isPortTaken,
  runToEnd,
  stackEnv,
  startFakes,
  startWeb,
  startWorker,
  stopParts,
  waitFor,
  type Part,
  type StackPlan,
} from "./stack";

const webPort = Number(process.env.PORT ?? 3000);
const plan: StackPlan = {
  webPort,
  s3Port: Number(process.env.S3_PORT ?? 3901),
  stripePort: Number(process.env.STRIPE_PORT ?? 3902),
  resendPort: Number(process.env.RESEND_PORT ?? 3903),
  folder: path.resolve(process.env.DEMO_DIR ?? ".demo"),
  demo: true,
};

const say = (line: string) => console.log(line);
const parts: Part[] = [];
let stopping = false;

async function stop(code: number): Promise<never> {
  stopping = true;
  await stopParts(parts);
  process.exit(code);
}

function watch(part: Part): Part {
  parts.push(part);
  part.process.once("exit", (code) => {
    if (stopping) return;
    console.error(`${part.name} ended with ${code}. Its log is in ${path.join(plan.folder, "logs")}.`);
    void stop(1);
  });
  return part;
}

async function main(): Promise<void> {
  process.on("SIGINT", () => void stop(0));
  process.on("SIGTERM", () => void stop(0));
  for (const [name, port] of Object.entries({
    PORT: plan.webPort,
    S3_PORT: plan.s3Port,
    STRIPE_PORT: plan.stripePort,
    RESEND_PORT: plan.resendPort,
  })) {
    if (await isPortTaken(port)) throw new Error(`Port ${port} is taken. Set ${name} to a free one.`);
  }
  // Stands while the data is being made: a start that was interrupted leaves it, and half a demo is of no use.
  const unfinished = path.join(plan.folder, "unfinished");
  if (existsSync(unfinished)) {
    say("The last start was interrupted before the demo's data was complete; making it anew.");
    rmSync(plan.folder, { recursive: true, force: true });
  }
  const isFirst = !existsSync(path.join(plan.folder, "merestone.sqlite"));
  if (isFirst) {
    mkdirSync(plan.folder, { recursive: true });
    writeFileSync(unfinished, "");
  }
  await ensureBuilt(say);
  const fakes = watch(startFakes(plan));
  await Promise.all(
    [plan.s3Port, plan.stripePort, plan.resendPort].map((port) =>
      waitFor(`http://127.0.0.1:${port}/`, fakes),
    ),
  );
  await runToEnd("node", ["--import", "tsx", "lib/cli/migrate.ts"], stackEnv(plan));
  const web = watch(startWeb(plan));
  await waitFor(`http://127.0.0.1:${plan.webPort}/api/health`, web);
  watch(startWorker(plan));
  if (isFirst) {
    say("Rendering the demo's pictures and playing its first weeks (about a minute) ...");
    await runToEnd(
      "node",
      ["--import", "tsx", "db/seed/run.ts"],
      stackEnv(plan),
      path.join(plan.folder, "logs", "seed.log"),
      say,
    );
    rmSync(unfinished);
  }
  say(banner());
}

function banner(): string {
  const at = (port: number) => `http://127.0.0.1:${port}`;
  return `
Merestone is ready:  ${at(plan.webPort)}

  requester   ines.calder@skerrow.example      Skerrow Bay Shore Trust (owner)
  annotator   tomas.brandt@skerrow.example     has work, scores and earnings
  admin       ada.merrin@merestone.example     docket, ledger, jobs
  password    wrack-line-2026                  for every demo account

  mail        ${at(plan.resendPort)}           every letter the product sends
  card        4242 4242 4242 4242, any date and code (local stand-in for Stripe)

The data is kept in ${path.relative(process.cwd(), plan.folder) || plan.folder}; "npm run reset" deletes it. Stop with Ctrl+C.`;
}

main().catch(async (error: unknown) => {
  console.error(error instanceof Error ? error.message : error);
  await stop(1);
});
