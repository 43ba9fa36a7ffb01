import type { SketchPoint } from "./outlines";

type Blob = {
  at: SketchPoint;
  radius: SketchPoint;
  /** Which hand drew it: changes where it strays, not by how much. */
  hand: number;
  /** How far it strays, as a share of the radius. */
  stray: number;
  clicks: number;
};

/** A rounded, lumpy object as one hand drew it: the same object for every hand, plus that hand's wavering. */
export function blob({ at: [x, y], radius: [across, down], hand, stray, clicks }: Blob): SketchPoint[] {
  return Array.from({ length: clicks }, (_, index): SketchPoint => {
    const turn = ((index + hand * 0.37) / clicks) * 2 * Math.PI;
    const object = 1 + 0.08 * Math.cos(2 * turn + 0.6) + 0.06 * Math.cos(3 * turn - 1.1);
    const wavering = stray * (Math.sin(3 * turn + 1.9 * hand) + 0.6 * Math.sin(7 * turn + 4.3 * hand));
    const reach = object + wavering;
    return [x + across * reach * Math.cos(turn), y + down * reach * Math.sin(turn)];
  });
}
