import { boxIou } from "@/lib/geometry/box";
import type { Box } from "@/lib/geometry/types";

export type Found = { image: number; box: Box; score: number };

/**
 * Area under the precision envelope over all recall points (Everingham et al., PASCAL VOC, 2010), and for each found box, in the
 * order given, whether it met an object that none with a higher score met. Ties by order.
 */
export function averagePrecision(
  found: readonly Found[],
  truth: readonly { image: number; box: Box }[],
  iouMin = 0.5,
): { value: number; hits: boolean[] } {
  const hits = found.map(() => false);
  if (truth.length === 0) return { value: 0, hits };
  const perImage = new Map<number, { box: Box; isTaken: boolean }[]>();
  for (const { image, box } of truth)
    perImage.set(image, [...(perImage.get(image) ?? []), { box, isTaken: false }]);
  const order = found.map((_, n) => n).sort((a, b) => found[b]!.score - found[a]!.score || a - b);
  const precision: number[] = [];
  const isHit: boolean[] = [];
  let right = 0;
  order.forEach((n, place) => {
    let best = iouMin;
    let own: { isTaken: boolean } | undefined;
    for (const entry of perImage.get(found[n]!.image) ?? []) {
      const iou = entry.isTaken ? 0 : boxIou(found[n]!.box, entry.box);
      if (iou >= best) [best, own] = [iou, entry];
    }
    if (own) {
      own.isTaken = true;
      hits[n] = true;
      right++;
    }
    isHit.push(own !== undefined);
    precision.push(right / (place + 1));
  });
  let value = 0;
  for (let place = precision.length - 1, envelope = 0; place >= 0; place--) {
    envelope = Math.max(envelope, precision[place]!);
    if (isHit[place]) value += envelope / truth.length;
  }
  return { value, hits };
}
