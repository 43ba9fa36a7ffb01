import { spawnSync } from "node:child_process";
import path from "node:path";
import { expect, it } from "vitest";
import { fuzz } from "@/tests/support/fuzz";

it("mutated files are read or refused in one line, without a crash or a hang", () => {
  const report = fuzz({ rounds: 800, seed: 7 });
  expect(report.failures).toEqual([]);
  expect(report.refused).toBeGreaterThan(300);
  expect(report.read).toBeGreaterThan(50);
  expect(report.slowestMs).toBeLessThan(1000);
});

it("the same in any number by command", () => {
  const run = spawnSync(process.execPath, ["--import", "tsx", path.resolve("tests/support/fuzz.ts"), "50"], {
    encoding: "utf8",
  });
  expect(run.stdout).toMatch(/^50 mutated files/);
  expect(run.status).toBe(0);
});
