import { spawn } from "node:child_process";
import { existsSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, describe, expect, it } from "vitest";

const ROOT = path.resolve(import.meta.dirname, "../../..");
const TRUTH = path.join(ROOT, "tests/support/example/truth.coco.json");
const LABELS = path.join(ROOT, "tests/support/example/labels.coco.json");
const folder = mkdtempSync(path.join(tmpdir(), "cli-"));
afterAll(() => rmSync(folder, { recursive: true }));
const place = (name: string) => path.join(folder, name);

type Run = { code: number | null; out: string; err: string };

function run(command: "measure" | "convert", ...args: string[]): Promise<Run> {
  return new Promise((resolve, reject) => {
    const child = spawn(
      process.execPath,
      ["--import", "tsx", path.join(ROOT, `lib/cli/${command}.ts`), ...args],
      { cwd: ROOT },
    );
    let [out, err] = ["", ""];
    child.stdout.on("data", (chunk: Buffer) => (out += chunk.toString()));
    child.stderr.on("data", (chunk: Buffer) => (err += chunk.toString()));
    child.on("error", reject);
    child.on("close", (code) => resolve({ code, out, err }));
  });
}

describe.concurrent("measure", () => {
  it("prints the report of the example as JSON", async () => {
    const { code, out, err } = await run("measure", "--truth", TRUTH, "--labels", LABELS);
    expect([code, err]).toEqual([0, ""]);
    const report = JSON.parse(out) as {
      overall: Record<string, unknown>;
      ap: Record<string, Record<string, unknown>>;
    };
    // Four objects that count (the crowd does not), all found; one of five labels is false.
    expect(report.overall).toMatchObject({ objects: 4, labels: 5, at50: { precision: 0.8, recall: 1 } });
    expect(report.ap.box?.ap).toBeGreaterThan(0.7);
    expect(report).toMatchObject({ images: 3, imagesWithoutLabels: 0, imagesLeftOut: 0 });
  });

  it("finds a file equal to itself perfect, and writes the report where it is told", async () => {
    const { code, out } = await run(
      "measure",
      "--truth",
      TRUTH,
      "--labels",
      TRUTH,
      "--out",
      place("report.json"),
    );
    expect([code, out]).toEqual([0, ""]);
    expect(JSON.parse(readFileSync(place("report.json"), "utf8"))).toMatchObject({
      overall: { pq: 1, meanIou: 1 },
    });
  });

  it("judges a bare list of results", async () => {
    const results = [{ image_id: 1, category_id: 1, bbox: [4.5, 5.25, 17.5, 26.25], score: 0.9 }];
    writeFileSync(place("results.json"), JSON.stringify(results));
    const { code, out } = await run("measure", "--truth", TRUTH, "--labels", place("results.json"));
    expect(code).toBe(0);
    expect(JSON.parse(out)).toMatchObject({ overall: { labels: 1 } });
  });

  it.each<[string, string, RegExp]>([
    ["a file that is not there", "absent.json", /^measure: \S*absent\.json: no such file or folder\n$/],
    [
      "a file that is not JSON",
      "broken.json",
      /^measure: \S*broken\.json: annotations\[0\]: the file ends inside this record\n$/,
    ],
    [
      "a wrong record",
      "record.json",
      /^measure: \S*record\.json: annotations\[1\]: bbox has 3 numbers, not 4\n$/,
    ],
    [
      "an unknown class",
      "class.json",
      /^measure: \S*class\.json: annotations\[0\]: category_id 9 is not listed in categories\n$/,
    ],
    [
      "another size of image",
      "size.json",
      /^measure: \S*size\.json: image wrack-line\/0001\.jpg: is 10 x 10 px here and 64 x 48 px in the truth\n$/,
    ],
  ])("refuses %s with one line and code 2", async (_, name, message) => {
    const head =
      '{"images":[{"id":1,"file_name":"wrack-line/0001.jpg","width":64,"height":48}],"categories":[{"id":1,"name":"cap"}],"annotations":[';
    const box = '{"image_id":1,"category_id":1,"bbox":[1,1,2,2]}';
    const contents: Record<string, string> = {
      "broken.json": `${head}{"image_id":1,`,
      "record.json": `${head}${box},{"image_id":1,"category_id":1,"bbox":[1,1,2]}]}`,
      "class.json": `${head}{"image_id":1,"category_id":9,"bbox":[1,1,2,2]}]}`,
      "size.json": `${head}${box}]}`.replace('"width":64,"height":48', '"width":10,"height":10'),
    };
    const content = contents[name];
    if (content !== undefined) writeFileSync(place(name), content);
    const { code, out, err } = await run("measure", "--truth", TRUTH, "--labels", place(name));
    expect(err).toMatch(message);
    expect([code, out]).toEqual([2, ""]);
  });

  it("explains itself, and names a missing or unknown option", async () => {
    const [help, missing, unknown] = await Promise.all([
      run("measure", "--help"),
      run("measure", "--truth", TRUTH),
      run("measure", "--truth", TRUTH, "--label", LABELS),
    ]);
    expect(help.code).toBe(0);
    expect(help.out).toContain("--labels FILE");
    expect(missing).toMatchObject({
      code: 2,
      err: "measure: --labels is missing; --help shows how it is used\n",
    });
    expect(unknown.code).toBe(2);
    expect(unknown.err).toMatch(/^measure: Unknown option '--label'[^\n]*\n$/);
  });
});

describe("convert", () => {
  const convert = (from: string, to: string, input: string, output: string) =>
    run("convert", "--from", from, "--to", to, "--in", input, "--out", output);

  it.concurrent("brings COCO back unchanged through GeoJSON and Web Annotation", async () => {
    expect((await convert("coco", "coco", TRUTH, place("plain.json"))).code).toBe(0);
    for (const format of ["geojson", "webannotation"]) {
      expect((await convert("coco", format, TRUTH, place(format))).code).toBe(0);
      expect((await convert(format, "coco", place(format), place(`${format}.json`))).code).toBe(0);
      expect(readFileSync(place(`${format}.json`), "utf8")).toBe(readFileSync(place("plain.json"), "utf8"));
    }
  });

  it.concurrent("writes folders of VOC and masks, and a CSV summary", async () => {
    const runs = await Promise.all([
      convert("coco", "voc", TRUTH, place("voc")),
      convert("coco", "mask", TRUTH, place("mask")),
      convert("coco", "csv", TRUTH, place("all.csv")),
    ]);
    expect(runs.map(({ code }) => code)).toEqual([0, 0, 0]);
    expect(readdirSync(place("voc/wrack-line"))).toEqual(["0001.xml", "0002.xml", "0003.xml"]);
    expect(readdirSync(place("mask")).sort()).toEqual(["instances.json", "wrack-line"]);
    expect(readFileSync(place("all.csv"), "utf8").split("\r\n")).toHaveLength(7);
    const back = await Promise.all([
      convert("voc", "coco", place("voc"), place("from-voc.json")),
      convert("mask", "coco", place("mask"), place("from-mask.json")),
    ]);
    expect(back.map(({ code }) => code)).toEqual([0, 0]);
  });

  it.concurrent("leaves nothing behind when the input is bad, and what was there as it was", async () => {
    writeFileSync(place("kept.csv"), "before");
    writeFileSync(place("bad.json"), '{"images":[],"categories":[],"annotations":[{"image_id":1}]}');
    const { code, err } = await convert("coco", "csv", place("bad.json"), place("kept.csv"));
    expect(code).toBe(2);
    expect(err).toMatch(/^convert: \S*bad\.json: [^\n]+\n$/);
    expect(readFileSync(place("kept.csv"), "utf8")).toBe("before");
    const folderRun = await convert("coco", "mask", place("bad.json"), place("never"));
    expect([folderRun.code, existsSync(place("never"))]).toEqual([2, false]);
    // Other tests of this file write beside these at the same time, so only these names count.
    const left = readdirSync(folder).filter((name) => /^(kept|never).*partial/.test(name));
    expect(left).toEqual([]);
  });

  it.concurrent("refuses a folder with something in it, and a format that it does not know", async () => {
    const [full, unknown] = await Promise.all([
      convert("coco", "voc", TRUTH, folder),
      convert("coco", "pdf", TRUTH, place("x")),
    ]);
    expect(full).toMatchObject({ code: 2, err: expect.stringMatching(/is there already and not empty/) });
    expect(unknown).toMatchObject({
      code: 2,
      err: expect.stringMatching(/--to is "pdf", not one of coco, voc/),
    });
  });
});
