import type { Box } from "@/lib/geometry/types";

/** Four offsets of a box to a prior, scaled by the usual variances 0.1 and 0.2. */
export type Offsets = readonly [dx: number, dy: number, dw: number, dh: number];

/** A size offset beyond this is a mistake, not a box (as in the reference implementation). */
const LOG_RATIO_MAX = Math.log(1000 / 16);

/** Offsets of the centre, in sizes of the prior over 0.1, and of the log size over 0.2. Source: Liu et al., SSD, ECCV 2016, eq. 2. */
export function encodeBox([x, y, w, h]: Box, [px, py, pw, ph]: Box): Offsets {
  return [
    (10 * (x + w / 2 - px - pw / 2)) / pw,
    (10 * (y + h / 2 - py - ph / 2)) / ph,
    5 * Math.log(w / pw),
    5 * Math.log(h / ph),
  ];
}

/** The box that the offsets describe; inverse of `encodeBox`. */
export function decodeBox([dx, dy, dw, dh]: Offsets, [px, py, pw, ph]: Box): Box {
  const w = pw * Math.exp(Math.min(LOG_RATIO_MAX, dw / 5));
  const h = ph * Math.exp(Math.min(LOG_RATIO_MAX, dh / 5));
  return [px + pw / 2 + (dx * pw) / 10 - w / 2, py + ph / 2 + (dy * ph) / 10 - h / 2, w, h];
}
