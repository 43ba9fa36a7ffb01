import { existsSync, rmSync } from "node:fs";
import path from "node:path";
import { isPortTaken } from "./stack";

const folder = path.resolve(process.env.DEMO_DIR ?? ".demo");

/** Deletes the demo's data. Refuses while the demo runs. */
async function main(): Promise<void> {
  if (await isPortTaken(Number(process.env.PORT ?? 3000)))
    throw new Error("The demo is running. Stop it first.");
  if (existsSync(folder)) rmSync(folder, { recursive: true });
  console.log("The demo's data is gone; the next start makes it anew.");
}

main().catch((error: unknown) => {
  console.error(error instanceof Error ? error.message : error);
  process.exit(1);
});
