import { execFile } from "node:child_process";
import path from "node:path";
import { promisify } from "node:util";
import { describe, expect, it } from "vitest";

const run = promisify(execFile);
const TIMEOUT_MS = 900_000;
/** What fits a minute and a half of one core; `SIMULATE_STEPS=5000` is what a nightly run takes. */
const STEPS = Number(process.env.SIMULATE_STEPS ?? 1200);

/** A process of its own: the simulation replaces the process's random bytes, Stripe client and fetch. */
const simulate = async (input: Record<string, number>): Promise<string> => {
  const options = Object.entries(input).flatMap(([name, value]) => [`--${name}`, String(value)]);
  const program = path.resolve("tests/simulation/simulate.ts");
  // A failed seed ends the process with 1: its words are what the test shows.
  return run(process.execPath, ["--import", "tsx", program, ...options]).then(
    ({ stdout }) => stdout,
    (error: { stdout?: string; stderr?: string }) => `${error.stdout ?? ""}${error.stderr ?? String(error)}`,
  );
};
const historyOf = (text: string) => /history ([0-9a-f]+)/.exec(text)?.[1];

describe("a market of careful and careless people, failing services and dying processes", () => {
  it(
    "loses no cent, no label and no payout, whatever the seed",
    async () => {
      const text = await simulate({ seed: 1, seeds: 20, steps: STEPS, kills: 2 });
      expect(text).toContain("20 seeds");
      expect(text).toContain("0 seeds failed");
    },
    TIMEOUT_MS,
  );

  it(
    "replays a seed exactly, deaths included",
    async () => {
      const once = historyOf(await simulate({ seed: 7, steps: 400, kills: 2 }));
      expect(once).toBeDefined();
      expect(historyOf(await simulate({ seed: 7, steps: 400, kills: 2 }))).toBe(once);
    },
    TIMEOUT_MS,
  );
});
