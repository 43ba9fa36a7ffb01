import { availableParallelism } from "node:os";
import path from "node:path";
import Piscina from "piscina";

let pool: Piscina | undefined;

/**
 * Threads for work that would hold the process up: one fewer than the machine's cores, one at least, so
 * that web and queue stay quick. A thread that is idle for a minute ends.
 */
export function threads(): Piscina {
  pool ??= new Piscina({
    filename: path.resolve(process.cwd(), "lib/jobs/threads/index.ts"),
    execArgv: ["--import", "tsx"],
    minThreads: 0,
    maxThreads: Math.max(1, availableParallelism() - 1),
    idleTimeout: 60_000,
  });
  return pool;
}

export async function stopThreads(): Promise<void> {
  await pool?.destroy();
  pool = undefined;
}
