import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";

/** Share of the objects of all pictures that some found box meets at IoU 0.5 or more; 1 where there are no objects. */
export function recallAmongFirst(
  pictures: readonly { objects: readonly Box[]; found: readonly Box[] }[],
): number {
  let [all, met] = [0, 0];
  for (const { objects, found } of pictures) {
    all += objects.length;
    met += objects.filter((object) => found.some((box) => boxIou(box, object) >= 0.5)).length;
  }
  return all === 0 ? 1 : met / all;
}
