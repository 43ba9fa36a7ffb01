import { wrackDensity, type Beach } from "./beach";
import { between, nearZero, type Random } from "./random";
import type { Bounds, Relief } from "./relief";
import { ramp } from "./texture";

/** A line of boot prints or of birds' feet across the sand. */
export function footprints(
  relief: Relief,
  beach: Beach,
  [left, near, right, far]: Bounds,
  random: Random,
): void {
  const isBird = random() < 0.6;
  let [x, y] = [between(random, left, right), between(random, near, far)];
  let heading = random() * 6.283;
  for (let step = 0; step < (isBird ? 26 : 7); step++) {
    heading += nearZero(random) * 0.25;
    const stride = isBird ? 7.5 : 62;
    x += Math.cos(heading) * stride;
    y += Math.sin(heading) * stride;
    const side = step % 2 === 0 ? 1 : -1;
    const [px, py] = [
      x - Math.sin(heading) * side * (isBird ? 1.6 : 9),
      y + Math.cos(heading) * side * (isBird ? 1.6 : 9),
    ];
    if (
      wrackDensity(beach, beach.inland(px, py), beach.along(px, py)) > 0.35 ||
      (beach.hasWater && beach.inland(px, py) < 8)
    )
      continue;
    const [c, s] = [Math.cos(heading), Math.sin(heading)];
    relief.model(px, py, isBird ? 4 : 20, (dx, dy) => {
      const [a, b] = [dx * c + dy * s, -dx * s + dy * c];
      if (isBird) {
        const toe = Math.min(
          ...[-0.62, 0, 0.62].map((turn) => toeDistance(a, b, turn, 2.9)),
          toeDistance(a, b, Math.PI, 0.9),
        );
        return -0.3 * Math.exp(-((toe / 0.26) ** 2)) + 0.07 * Math.exp(-(((toe - 0.65) / 0.25) ** 2));
      }
      const sole = Math.max(Math.abs(a) / 14, Math.abs(b) / (4.6 + 0.9 * Math.cos(a / 4.2)));
      const tread = sole < 0.95 ? 0.16 * Math.sin(a * 2.6 + Math.abs(b) * 0.9) : 0;
      return -1.5 * ramp(1.08, 0.88, sole) + 0.55 * Math.exp(-(((sole - 1.2) / 0.12) ** 2)) + tread;
    });
  }
}

function toeDistance(a: number, b: number, turn: number, length: number): number {
  const [c, s] = [Math.cos(turn), Math.sin(turn)];
  const along = Math.min(length, Math.max(0, a * c + b * s));
  return Math.hypot(a - along * c, b - along * s);
}
