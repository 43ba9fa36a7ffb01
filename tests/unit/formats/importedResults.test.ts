import { describe, expect, it } from "vitest";
import { FormatError } from "@/lib/formats/dataset";
import { readImportedResults, type ImportTarget } from "@/lib/formats/importedResults";

const TARGET: ImportTarget = {
  images: [
    { id: "img_a", fileName: "spring-001.jpg", width: 640, height: 480 },
    { id: "img_b", fileName: "spring-002.jpg", width: 640, height: 480 },
  ],
  classes: [
    { id: "cls_1", number: 1, name: "bottle" },
    { id: "cls_2", number: 2, name: "rope" },
  ],
};
const record = (over: object = {}) => ({
  file_name: "spring-001.jpg",
  category_id: 1,
  bbox: [10, 20, 30, 40],
  score: 0.8,
  ...over,
});
const list = (records: readonly object[]) =>
  `[\n${records.map((entry) => JSON.stringify(entry)).join(",\n")}\n]\n`;
const wrongOf = (text: string) =>
  readImportedResults(text, TARGET).wrong.map(({ line, reason }) => `line ${line}: ${reason}`);

describe("imported results", () => {
  it("go to their picture and class, best first, clipped to the picture", () => {
    const text = list([
      record({ score: 0.3 }),
      record({ bbox: [600, 400, 100, 100], category_id: 2, score: 0.9 }),
      record({ file_name: "spring-002.jpg", category_id: 0 }),
    ]);
    const { byImage, used, wrong } = readImportedResults(text, TARGET);
    expect({ used, wrong }).toEqual({ used: 3, wrong: [] });
    expect(byImage.get("img_a")).toEqual([
      { box: [600, 400, 40, 80], rings: [], classId: "cls_2", score: 0.9 },
      { box: [10, 20, 30, 40], rings: [], classId: "cls_1", score: 0.3 },
    ]);
    expect(byImage.get("img_b")?.[0]?.classId).toBeNull();
  });

  it("name each wrong record with its line and reason, and use the others", () => {
    const text = list([
      record(),
      record({ file_name: "x.jpg" }),
      record({ category_id: 7 }),
      record({ score: 1.4 }),
      record({ bbox: [10, 20, -3, 40] }),
      record({ bbox: undefined }),
      record({ bbox: [700, 20, 30, 40] }),
      record({ file_name: undefined, image_id: 4 }),
      record({ score: 0.1 }),
    ]);
    expect(wrongOf(text)).toEqual([
      "line 3: unknown file_name 'x.jpg'",
      "line 4: the key has no class number 7",
      "line 5: score is 1.4, not a number from 0 to 1",
      "line 6: bbox is -3 x 40 px, which is negative",
      "line 7: has neither segmentation nor bbox",
      "line 8: lies outside its picture",
      "line 9: has no file_name, and the file lists no images to look up image_id in",
    ]);
    expect(readImportedResults(text, TARGET).used).toBe(2);
  });

  it("state the line on which a record begins however the file is broken into lines", () => {
    const pretty = JSON.stringify(
      [record(), record({ file_name: 'a"]},{[\\.jpg' }), record({ score: 2 })],
      null,
      2,
    );
    const starts = pretty.split("\n").flatMap((content, n) => (content === "  {" ? [n + 1] : []));
    expect(readImportedResults(pretty, TARGET).wrong.map(({ line }) => line)).toEqual(starts.slice(1));
    expect(wrongOf(JSON.stringify([record(), record({ score: 2 })]))[0]).toMatch(/^line 1: score/);
    expect(wrongOf(`[ 5,\n "[",\n${JSON.stringify(record())}]`)).toEqual([
      "line 1: is not an object",
      "line 2: is not an object",
    ]);
  });

  it("look ids up in an accompanying list of images and of categories", () => {
    const text = JSON.stringify(
      {
        images: [
          { id: 9, file_name: "spring-002.jpg", width: 640, height: 480 },
          { id: 10, file_name: "gone.jpg", width: 1, height: 1 },
        ],
        categories: [
          { id: 50, name: "Rope" },
          { id: 51, name: "ship" },
        ],
        annotations: [
          {
            image_id: 9,
            category_id: 50,
            bbox: [1, 1, 20, 20],
            score: 0.5,
            segmentation: [[1, 1, 21, 1, 21, 21]],
          },
          { image_id: 10, category_id: 50, bbox: [1, 1, 20, 20], score: 0.5 },
          { image_id: 9, category_id: 51, bbox: [1, 1, 20, 20], score: 0.5 },
        ],
      },
      null,
      1,
    );
    const { byImage, wrong } = readImportedResults(text, TARGET);
    expect(byImage.get("img_b")).toMatchObject([
      {
        classId: "cls_2",
        rings: [
          [
            [1, 1],
            [21, 1],
            [21, 21],
          ],
        ],
      },
    ]);
    expect(wrong.map(({ reason }) => reason)).toEqual([
      "unknown image_id 10",
      "category 'ship' is not in the key",
    ]);
  });

  it("may be one record a line, where a line that is not JSON is named and the others used", () => {
    const text = `${JSON.stringify(record())}\n{"file_name": \n${JSON.stringify(record({ score: 0.2 }))}\n`;
    expect(wrongOf(text)).toEqual(["line 2: is not valid JSON"]);
    expect(readImportedResults(text, TARGET).used).toBe(2);
  });

  it("are refused whole, with the line, where the file is no JSON, empty or something else", () => {
    const messageOf = (text: string) => {
      try {
        readImportedResults(text, TARGET);
      } catch (error) {
        return error instanceof FormatError ? error.message : "another error";
      }
      return "nothing";
    };
    expect(messageOf("")).toMatch(/empty/);
    expect(messageOf('{"a": 1}')).toMatch(/neither a list/);
    expect(messageOf("3")).toMatch(/neither a list/);
    expect(messageOf("null")).toMatch(/neither a list/);
    expect(messageOf(`[\n${JSON.stringify(record())}\n${JSON.stringify(record())}\n]`)).toMatch(
      /^line 3: is not valid JSON/,
    );
  });
});
