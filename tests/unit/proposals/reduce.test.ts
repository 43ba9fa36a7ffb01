import { describe, expect, it } from "vitest";
import type { Box } from "@/lib/geometry/types";
import { REDUCTIONS, reduceHits } from "@/lib/proposals/reduce";

/** Hits scattered evenly around the corners of given boxes, the nearest with the highest score. */
function hitsOn(objects: readonly Box[]): { boxes: Box[]; scores: number[] } {
  const boxes: Box[] = [];
  const scores: number[] = [];
  for (const [x, y, w, h] of objects) {
    for (let step = 0; step < 9; step++) {
      const dx = ((step % 3) - 1) * 2;
      const dy = (Math.floor(step / 3) - 1) * 2;
      boxes.push([x + dx, y + dy, w, h]);
      scores.push(0.9 - 0.05 * Math.hypot(dx, dy));
    }
  }
  return { boxes, scores };
}

describe("reduction of redundant hits", () => {
  it.each(REDUCTIONS)("leaves one hit for each of two objects that lie apart: %s", (method) => {
    const { boxes, scores } = hitsOn([
      [10, 10, 40, 40],
      [200, 10, 40, 40],
    ]);
    const left = reduceHits(method, boxes, scores, { scoreMin: 0.5 });
    expect(left).toHaveLength(2);
    expect(left.map(({ box }) => Math.round(box[0])).sort((a, b) => a - b)).toEqual([10, 200]);
  });

  it("keeps two close peaks two under mean shift where suppression at a fixed overlap leaves one", () => {
    // The two lie 16 px apart and overlap by IoU 0.43; suppression that joins the scattered hits of one also swallows the other.
    const { boxes, scores } = hitsOn([
      [10, 10, 40, 40],
      [26, 10, 40, 40],
    ]);
    expect(reduceHits("mean shift", boxes, scores, { bandwidth: 0.2 })).toHaveLength(2);
    expect(reduceHits("suppression", boxes, scores, { iouMax: 0.3 })).toHaveLength(1);
  });

  it.each(REDUCTIONS)("answers nothing to nothing and one to one: %s", (method) => {
    expect(reduceHits(method, [], [])).toEqual([]);
    expect(reduceHits(method, [[1, 2, 3, 4]], [0.9]).map(({ box }) => box)).toEqual([[1, 2, 3, 4]]);
  });
});
