import { spawn } from "node:child_process";
import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import { z } from "zod";

const ROOT = path.resolve(import.meta.dirname, "../../..");
const TRUTH = path.join(ROOT, "tests/support/example/truth.coco.json");
const LABELS = path.join(ROOT, "tests/support/example/labels.coco.json");
const folder = mkdtempSync(path.join(tmpdir(), "cli-consensus-"));
afterAll(() => rmSync(folder, { recursive: true }));
const place = (name: string) => path.join(folder, name);

const Agreed = z.object({
  images: z.array(z.object({ file_name: z.string() })),
  categories: z.array(z.object({ id: z.number(), name: z.string() })),
  annotations: z.array(z.object({ support: z.number(), spread: z.number(), score: z.number() })),
});
const Report = z.object({
  overall: z.object({ images: z.number(), agreed: z.number() }),
  annotators: z.array(z.object({ annotator: z.string(), quality: z.number() })),
});

function consensus(...args: string[]): Promise<{ code: number | null; err: string }> {
  return new Promise((resolve, reject) => {
    const entry = path.join(ROOT, "lib/cli/consensus.ts");
    const child = spawn(process.execPath, ["--import", "tsx", entry, ...args], { cwd: ROOT });
    let err = "";
    child.stderr.on("data", (chunk: Buffer) => (err += chunk.toString()));
    child.on("error", reject);
    child.on("close", (code) => resolve({ code, err }));
  });
}

describe.concurrent("consensus on files", () => {
  it("merges the example's two files into one, with support, spread and score, and a report of people", async () => {
    const files = [
      "--in",
      TRUTH,
      "--in",
      LABELS,
      "--out",
      place("agreed.json"),
      "--report",
      place("report.json"),
    ];
    expect(await consensus(...files)).toMatchObject({ code: 0 });
    const agreed = Agreed.parse(JSON.parse(readFileSync(place("agreed.json"), "utf8")));
    expect(agreed.images).toHaveLength(3);
    expect(agreed.annotations.length).toBeGreaterThanOrEqual(4); // the four objects that both drew
    expect(agreed.annotations.filter(({ support }) => support === 2).length).toBeGreaterThanOrEqual(4);
    expect(
      agreed.annotations.every(({ spread, score }) => spread >= 0 && spread < 1 && score > 0.5 && score <= 1),
    ).toBe(true);
    const report = Report.parse(JSON.parse(readFileSync(place("report.json"), "utf8")));
    expect(report.annotators.map(({ annotator }) => annotator).sort()).toEqual(["labels.coco", "truth.coco"]);
    expect(report.overall).toEqual({ images: 3, agreed: agreed.annotations.length });
  }, 60_000);

  it("gives the same bytes whatever the order of the files", async () => {
    const runs = [
      ["--in", TRUTH, "--in", LABELS, "--out", place("one.json")],
      ["--in", LABELS, "--in", TRUTH, "--out", place("two.json")],
    ];
    for (const args of runs) expect(await consensus(...args)).toMatchObject({ code: 0 });
    expect(readFileSync(place("one.json"), "utf8")).toBe(readFileSync(place("two.json"), "utf8"));
  }, 60_000);

  it("refuses a broken file in one line that names it, and writes nothing", async () => {
    writeFileSync(place("broken.json"), '{"images": [');
    const { code, err } = await consensus(
      "--in",
      TRUTH,
      "--in",
      place("broken.json"),
      "--out",
      place("no.json"),
    );
    expect(code).toBe(2);
    expect(err.trim().split("\n")).toHaveLength(1);
    expect(err).toContain("broken.json");
    expect(existsSync(place("no.json"))).toBe(false);
  }, 60_000);
});
