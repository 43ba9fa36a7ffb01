import { expect, it } from "vitest";
import { svgPathOf } from "@/lib/geometry/svgPath";

it("writes a box clockwise from its top left corner, and closes it", () => {
  expect(svgPathOf({ kind: "box", box: [1, 2, 30.5, 40] })).toBe("M1 2L31.5 2L31.5 42L1 42Z");
});

it("writes each ring as a closed subpath of its own, so that a hole stays one under the even-odd rule", () => {
  const rings = [
    [
      [0, 0],
      [9, 0],
      [0, 9],
    ],
    [
      [1, 1],
      [1e-7, 2],
      [2, -0.1],
    ],
  ] as const;
  expect(svgPathOf({ kind: "polygon", rings })).toBe("M0 0L9 0L0 9ZM1 1L1e-7 2L2 -0.1Z");
});
