import { readFileSync } from "node:fs";
import path from "node:path";
import { describe, expect, it } from "vitest";
import { z } from "zod";
import { ClipType } from "clipper2-ts";
import { combineRings } from "@/lib/geometry/clip";
import { boundedBoolean } from "@/lib/geometry/clipper";
import { prepareRings, regionIntersectionArea } from "@/lib/geometry/region";
import type { Rings } from "@/lib/geometry/types";

const RingsInput = z.array(z.array(z.tuple([z.number(), z.number()])));
const hang = z
  .object({ subject: RingsInput, clip: RingsInput })
  .parse(
    JSON.parse(
      readFileSync(path.resolve(import.meta.dirname, "../../golden/geometry/clip-hang.json"), "utf8"),
    ),
  );

/** The clipper's grid is 1/10,000 px: at this scale it sees the very integers of the golden file. */
const scaled = (rings: Rings, factor: number): Rings =>
  rings.map((ring) => ring.map(([x, y]) => [x * factor, y * factor]));

describe("combining rings on which the clipper's sweep never ends", () => {
  it("stops the sweep and says that it failed", () => {
    const paths = (rings: Rings) => rings.map((ring) => ring.map(([x, y]) => ({ x, y })));
    // Without the count of scanlines this call does not return.
    expect(boundedBoolean(ClipType.Difference, paths(hang.subject), paths(hang.clip), 0)).toBeUndefined();
  }, 5000);

  it.each([1e-4, 1e-3, 0.1, 1])(
    "ends with the right area at a scale of %d",
    (factor) => {
      const subject = scaled(hang.subject, factor);
      const clip = scaled(hang.clip, factor);
      const [a, b] = [prepareRings(subject), prepareRings(clip)];
      const expected = a.areaPx2 - regionIntersectionArea(a, b);
      const { areaPx2 } = prepareRings(combineRings(subject, clip, "difference"));
      // Rounding by up to half a grid step along some 3,000 px of edges (scaled).
      expect(Math.abs(areaPx2 - expected)).toBeLessThan(1e-3 * Math.max(expected, factor));
    },
    5000,
  );
});
