import path from "node:path";
import {
  runToEnd,
  stackEnv,
  startFakes,
  startPart,
  startWorker,
  stopParts,
  waitFor,
  type Part,
  type StackPlan,
} from "./stack";

/** Everything for work on the code: stand-ins, worker, and the web application rebuilt as files change. */
const plan: StackPlan = {
  webPort: Number(process.env.PORT ?? 3000),
  s3Port: Number(process.env.S3_PORT ?? 3901),
  stripePort: Number(process.env.STRIPE_PORT ?? 3902),
  resendPort: Number(process.env.RESEND_PORT ?? 3903),
  folder: path.resolve(process.env.DEMO_DIR ?? ".demo"),
  demo: true,
};

const parts: Part[] = [];
const stop = async (code: number) => {
  await stopParts(parts);
  process.exit(code);
};

async function main(): Promise<void> {
  process.on("SIGINT", () => void stop(0));
  process.on("SIGTERM", () => void stop(0));
  parts.push(startFakes(plan));
  for (const port of [plan.s3Port, plan.stripePort, plan.resendPort]) {
    const [fakes] = parts;
    if (fakes) await waitFor(`http://127.0.0.1:${port}/`, fakes);
  }
  await runToEnd("node", ["--import", "tsx", "lib/cli/migrate.ts"], stackEnv(plan));
  parts.push(startWorker(plan));
  parts.push(
    startPart(
      "web",
      ["node_modules/next/dist/bin/next", "dev", "-H", "127.0.0.1", "-p", String(plan.webPort)],
      plan,
      { NODE_ENV: "development" },
    ),
  );
  console.log(`http://127.0.0.1:${plan.webPort} (logs in ${path.join(plan.folder, "logs")})`);
}

main().catch(async (error: unknown) => {
  console.error(error instanceof Error ? error.message : error);
  await stop(1);
});
