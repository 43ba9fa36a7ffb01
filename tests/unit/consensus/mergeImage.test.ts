import { describe, expect, it } from "vitest";
import { mergeImage } from "@/lib/consensus/mergeImage";
import type { ImageLabels, LabelledInstance } from "@/lib/consensus/types";
import type { Box, Point } from "@/lib/geometry/types";

const box = (id: string, [x, y, width, height]: Box, classId = "can"): LabelledInstance => ({
  id,
  classId,
  shape: { kind: "box", box: [x, y, width, height] },
});

const rectangle = (id: string, [x, y, width, height]: Box, classId = "can"): LabelledInstance => {
  const ring: Point[] = [
    [x, y],
    [x + width, y],
    [x + width, y + height],
    [x, y + height],
  ];
  return { id, classId, shape: { kind: "polygon", rings: [ring] } };
};

const imageOf = (...perAnnotator: LabelledInstance[][]): ImageLabels => ({
  width: 400,
  height: 300,
  annotators: perAnnotator.map((instances, k) => ({ annotatorId: `ann_${k}`, instances })),
});

describe("merging one image", () => {
  it("agrees on what three of three drew, with the median box", () => {
    const { agreed, verdict, scores } = mergeImage(
      imageOf([box("a", [10, 10, 50, 40])], [box("b", [11, 10, 50, 40])], [box("c", [12, 12, 50, 40])]),
    );
    expect(agreed).toHaveLength(1);
    expect(agreed[0]).toMatchObject({ classId: "can", support: 3, seen: 3, box: [11, 10, 50, 40] });
    expect(agreed[0]?.members).toHaveLength(3);
    expect(verdict).toBe("settled");
    expect(scores.map(({ found, missed, spurious }) => [found, missed, spurious])).toEqual([
      [1, 0, 0],
      [1, 0, 0],
      [1, 0, 0],
    ]);
  });

  it("leaves out what one of four drew and says so", () => {
    const real = (k: number) => rectangle(`r${k}`, [50 + k, 50, 60, 60]);
    const { agreed, leftOut } = mergeImage(
      imageOf([real(0), rectangle("ghost", [200, 200, 30, 30])], [real(1)], [real(2)], [real(3)]),
    );
    expect(agreed).toHaveLength(1);
    expect(leftOut).toMatchObject([{ annotatorId: "ann_0", instanceId: "ghost", reason: "unsupported" }]);
  });

  it("turns one that covers two neighbours into a vote for each", () => {
    const left = (k: number) => rectangle(`l${k}`, [50, 50 + k, 40, 60]);
    const right = (k: number) => rectangle(`r${k}`, [90, 50 + k, 40, 60]);
    const { agreed, leftOut, scores } = mergeImage(
      imageOf([left(0), right(0)], [left(1), right(1)], [rectangle("both", [50, 50, 80, 60])]),
    );
    expect(agreed).toHaveLength(2);
    expect(agreed.map(({ support }) => support)).toEqual([3, 3]);
    expect(leftOut).toMatchObject([{ instanceId: "both", reason: "covers-several" }]);
    expect(scores[2]?.instances[0]?.outcome).toBe("loose");
  });

  it("puts the two halves of one object back together", () => {
    const whole = (k: number) => rectangle(`w${k}`, [50 + k, 50, 80, 60]);
    const halves = [rectangle("h1", [50, 50, 40, 60]), rectangle("h2", [90, 50, 40, 60])];
    const { agreed, leftOut } = mergeImage(imageOf([whole(0)], [whole(1)], [whole(2)], halves));
    expect(agreed).toHaveLength(1);
    expect(agreed[0]?.support).toBe(4);
    expect(leftOut.every(({ reason }) => reason === "part-of")).toBe(true);
  });

  it("takes the class of the majority and names the outvoted one", () => {
    const at: Box = [50, 50, 60, 60];
    const { agreed, leftOut } = mergeImage(
      imageOf([rectangle("a", at, "can")], [rectangle("b", at, "can")], [rectangle("c", at, "bottle")]),
    );
    expect(agreed).toMatchObject([{ classId: "can", support: 2 }]);
    expect(leftOut).toMatchObject([{ instanceId: "c", reason: "outvoted-class" }]);
  });

  it("keeps an object of another class that lies inside a larger one", () => {
    const bottle = (k: number) => rectangle(`b${k}`, [50, 50 + k, 40, 120], "bottle");
    const cap = (k: number) => rectangle(`c${k}`, [60, 52 + k, 20, 15], "cap");
    const { agreed } = mergeImage(imageOf([bottle(0), cap(0)], [bottle(1), cap(1)], [bottle(2)]));
    expect(agreed.map(({ classId }) => classId).sort()).toEqual(["bottle", "cap"]);
  });

  it("gives an outline where some drew boxes, and boxes for classes kept as boxes", () => {
    const labels = imageOf(
      [rectangle("a", [50, 50, 60, 60])],
      [rectangle("b", [51, 50, 60, 60])],
      [box("c", [50, 50, 60, 60])],
    );
    expect(mergeImage(labels).agreed[0]?.shape.kind).toBe("polygon");
    expect(mergeImage(labels, { boxClasses: ["can"] }).agreed[0]?.shape.kind).toBe("box");
  });

  it("settles an image in which everybody found nothing, and asks on when only one has looked", () => {
    expect(mergeImage(imageOf([], [], []))).toMatchObject({ agreed: [], agreement: 1, verdict: "settled" });
    expect(mergeImage(imageOf([])).verdict).toBe("short");
    expect(mergeImage(imageOf()).verdict).toBe("short");
  });

  it("asks one more person below the target and gives up at the most that are asked", () => {
    const alone = (k: number) => [rectangle("x", [10 + 60 * k, 10, 50, 50])];
    expect(mergeImage(imageOf(alone(0), alone(1), alone(2)), { kMax: 5 }).verdict).toBe("short");
    expect(mergeImage(imageOf(alone(0), alone(1), alone(2)), { kMax: 3 }).verdict).toBe("split");
  });

  it("scores nobody by the own vote: two against one is spurious for the one", () => {
    const real = (k: number) => rectangle(`r${k}`, [50 + k, 50, 60, 60]);
    const { scores } = mergeImage(
      imageOf([real(0)], [real(1)], [real(2), rectangle("g", [200, 200, 30, 30])]),
    );
    expect(scores[2]).toMatchObject({ found: 1, spurious: 1 });
    expect(scores[2]?.quality).toBeLessThan(scores[0]?.quality ?? 0);
  });

  it("counts people whose labels are copies as one", () => {
    const many = (dx: number) =>
      [0, 1, 2, 3].map((k) => rectangle(`i${k}`, [20 + 90 * k + dx, 40 + 3 * dx, 60, 70]));
    const { agreed } = mergeImage(imageOf(many(0), many(0), many(4)));
    expect(agreed[0]).toMatchObject({ support: 2, seen: 2 });
  });
});
