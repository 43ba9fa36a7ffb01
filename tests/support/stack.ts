import { mkdtempSync, rmSync } from "node:fs";
import os from "node:os";
import path from "node:path";
import {
  freePort,
  runToEnd,
  stackEnv,
  startFakes,
  startWeb,
  startWorker,
  stopParts,
  waitFor,
  type Part,
  type StackPlan,
} from "@/lib/cli/stack";

export type Stack = {
  plan: StackPlan;
  url: string;
  mailUrl: string;
  stripeUrl: string;
  databaseFile: string;
  /** Ends the worker and starts another one: what a crash and a restart do. */
  restartWorker: () => Promise<void>;
  stop: () => Promise<void>;
};

/** The real application, worker and stand-ins on free ports, with an empty database in a folder of its own. */
export async function startStack({ worker = true } = {}): Promise<Stack> {
  const folder = mkdtempSync(path.join(os.tmpdir(), "merestone-test-"));
  const plan: StackPlan = {
    webPort: await freePort(),
    s3Port: await freePort(),
    stripePort: await freePort(),
    resendPort: await freePort(),
    folder,
    demo: true,
  };
  const parts: Part[] = [];
  try {
    const fakes = startFakes(plan);
    parts.push(fakes);
    for (const port of [plan.s3Port, plan.stripePort, plan.resendPort])
      await waitFor(`http://127.0.0.1:${port}/`, fakes);
    await runToEnd("node", ["--import", "tsx", "lib/cli/migrate.ts"], stackEnv(plan));
    const web = startWeb(plan);
    parts.push(web);
    await waitFor(`http://127.0.0.1:${plan.webPort}/api/health`, web);
    if (worker) parts.push(startWorker(plan));
  } catch (error) {
    await stopParts(parts);
    throw error;
  }
  return {
    plan,
    url: `http://127.0.0.1:${plan.webPort}`,
    mailUrl: `http://127.0.0.1:${plan.resendPort}`,
    stripeUrl: `http://127.0.0.1:${plan.stripePort}`,
    databaseFile: path.join(folder, "merestone.sqlite"),
    restartWorker: async () => {
      const index = parts.findIndex((part) => part.name === "worker");
      if (index >= 0) await stopParts(parts.splice(index, 1));
      parts.push(startWorker(plan));
    },
    stop: async () => {
      await stopParts(parts);
      rmSync(folder, { recursive: true, force: true });
    },
  };
}
