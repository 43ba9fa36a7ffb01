import { mkdtempSync, rmSync, symlinkSync } from "node:fs";
import os from "node:os";
import path from "node:path";
import { parseArgs } from "node:util";
import { build } from "vite";
import { migrateDatabase, openDatabase } from "@/db/client";
import { WEBHOOK_SECRET } from "./bank";
import { Episode, type Report } from "./episode";

const { values } = parseArgs({
  options: {
    seed: { type: "string", default: "1" },
    steps: { type: "string", default: "5000" },
    seeds: { type: "string", default: "1" },
    kills: { type: "string", default: "5" },
    first: { type: "boolean", default: false },
    verbose: { type: "boolean", default: false },
  },
});
const number = (name: "seed" | "steps" | "seeds" | "kills"): number => {
  const value = Number(values[name]);
  if (Number.isSafeInteger(value) && value >= 0) return value;
  console.error(`--${name} is a whole number, not ${JSON.stringify(values[name])}`);
  process.exit(2);
};

/** The product's process as one file of JavaScript: a process that is started a thousand times must start fast. */
async function buildProgram(folder: string): Promise<string> {
  await build({
    configFile: false,
    logLevel: "error",
    resolve: { alias: { "@": process.cwd() } },
    ssr: { noExternal: true, external: ["better-sqlite3"] },
    build: {
      ssr: path.resolve(import.meta.dirname, "productProcess.ts"),
      outDir: folder,
      emptyOutDir: false,
      target: "node20",
      minify: false,
      rollupOptions: { output: { entryFileNames: "product.mjs" } },
    },
  });
  // better-sqlite3 is native and stays where it is installed.
  symlinkSync(path.resolve("node_modules"), path.join(folder, "node_modules"), "dir");
  return path.join(folder, "product.mjs");
}

const line = (report: Report): string => {
  const {
    seed,
    steps,
    kills,
    days,
    submissions,
    payouts,
    payoutCents,
    topUpCents,
    calls,
    faults,
    seconds,
    history,
  } = report;
  const struck = Object.entries(faults).map(([name, count]) => `${name} ${count}`);
  return (
    `seed ${seed}: ${steps} steps over ${days.toFixed(0)} days, ${kills} kills, ${submissions} submissions, ` +
    `${payouts} payouts of $${(payoutCents / 100).toFixed(2)}, top-ups of $${(topUpCents / 100).toFixed(2)}, ${calls} calls (${struck.join(", ")}), ` +
    `${seconds.toFixed(1)} s, ${Math.round(steps / seconds)} steps/s, history ${history}`
  );
};

async function main(): Promise<number> {
  process.env.LOG_LEVEL = "silent";
  process.env.DISPUTE_TWO_ADMINS_CENTS = "200"; // small batches, and still some cases for two
  process.env.STRIPE_WEBHOOK_SECRET = WEBHOOK_SECRET;
  const [seed, steps, seeds, kills] = [number("seed"), number("steps"), number("seeds"), number("kills")];
  const folder = mkdtempSync(path.join(os.tmpdir(), "merestone-simulation-"));
  const total = { steps: 0, kills: 0, submissions: 0, payouts: 0, payoutCents: 0, failed: 0 };
  const startedMs = performance.now();
  try {
    const program = await buildProgram(folder);
    for (let next = seed; next < seed + seeds; next += 1) {
      const file = path.join(folder, `seed-${next}.sqlite`);
      const db = openDatabase(file);
      migrateDatabase(db);
      db.$client.close();
      const report = await new Episode({ seed: next, steps, kills, program, file }).run();
      console.log(line(report));
      if (values.verbose) console.table(report.operations);
      for (const key of ["steps", "kills", "submissions", "payouts", "payoutCents"] as const)
        total[key] += report[key];
      for (const suffix of ["", "-wal", "-shm"]) rmSync(file + suffix, { force: true });
      if (report.violations.length === 0) continue;
      total.failed += 1;
      console.error(`VIOLATION at step ${report.at} of seed ${next}:\n  ${report.violations.join("\n  ")}`);
      console.error(`replay: npm run simulate -- --seed ${next} --steps ${steps} --kills ${kills}`);
      if (values.first) break;
    }
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
  const seconds = (performance.now() - startedMs) / 1000;
  console.log(
    `${seeds} seeds, ${total.steps} steps, ${total.kills} kills, ${total.submissions} submissions and ${total.payouts} payouts ` +
      `($${(total.payoutCents / 100).toFixed(2)}) in ${seconds.toFixed(1)} s: ${total.failed} seeds failed`,
  );
  return total.failed > 0 ? 1 : 0;
}

process.exitCode = await main();
