import { spawn } from "node:child_process";
import { ensureBuilt } from "@/lib/cli/stack";

/**
 * `npm test`: builds the application once, then runs every test, browser tests included. Prints the closing
 * line "N passed, N failed, N skipped" over all of them and exits non-zero when one failed or none ran.
 */
type Summary = {
  numPassedTests: number;
  numFailedTests: number;
  numPendingTests: number;
  numTotalTests: number;
  success: boolean;
};

async function vitest(project: string): Promise<Summary | null> {
  const child = spawn(
    "node",
    [
      "node_modules/vitest/vitest.mjs",
      "run",
      "--project",
      project,
      "--reporter=default",
      "--reporter=json",
      `--outputFile.json=node_modules/.cache/tests-${project}.json`,
    ],
    {
      stdio: "inherit",
      env: {
        ...process.env,
        AWS_SDK_JS_NODE_VERSION_SUPPORT_WARNING_DISABLED: "true",
        NEXT_TELEMETRY_DISABLED: "1",
      },
    },
  );
  await new Promise((resolve) => child.on("close", resolve));
  const { readFileSync } = await import("node:fs");
  try {
    return JSON.parse(readFileSync(`node_modules/.cache/tests-${project}.json`, "utf8")) as Summary;
  } catch {
    return null;
  }
}

async function main(): Promise<void> {
  const browserOnly = process.argv.includes("--browser-only");
  const summaries: (Summary | null)[] = [];
  if (!browserOnly) summaries.push(await vitest("unit"));
  await ensureBuilt(console.log);
  summaries.push(await vitest("browser"));
  const sum = (pick: (summary: Summary) => number) =>
    summaries.reduce((total, s) => total + (s ? pick(s) : 0), 0);
  const failed = sum((s) => s.numFailedTests);
  const passed = sum((s) => s.numPassedTests);
  console.log(`\n${passed} passed, ${failed} failed, ${sum((s) => s.numPendingTests)} skipped`);
  const good = summaries.every((s) => s?.success) && failed === 0 && passed > 0;
  process.exit(good ? 0 : 1);
}

main().catch((error: unknown) => {
  console.error(error);
  process.exit(1);
});
