import type { Model, Placed } from "./litter";
import { lowestOf, pose, posed, raised } from "./mesh";
import { between, nearZero, pickWeighted, type Random } from "./random";
import type { Relief } from "./relief";

/** Lays a thing on the ground as it would lie, sunk in by a part, with sand drifted against it. */
export function settle(
  { parts, lengthCm, radiusCm }: Model,
  isFlat: boolean,
  [x, y]: [number, number],
  relief: Relief,
  random: Random,
): Placed[] {
  const yaw = random() * 6.283;
  const isUpright = !isFlat && lengthCm > 10 && random() < 0.04;
  const pitch = isFlat
    ? (random() < 0.62 ? 1 : -1) * (Math.PI / 2) + nearZero(random) * 0.45
    : isUpright
      ? Math.PI / 2 + nearZero(random) * 0.2
      : nearZero(random) * 0.16;
  const buried =
    radiusCm *
    pickWeighted(
      [
        [between(random, 0, 0.15), 5],
        [between(random, 0.2, 0.6), 3],
        [between(random, 0.7, 1.15), 1.3],
      ] as const,
      random,
    ) *
    (isFlat ? 0.35 : 1);
  const [dx, dy] = [
    Math.cos(yaw) * lengthCm * 0.3 * Math.cos(pitch),
    Math.sin(yaw) * lengthCm * 0.3 * Math.cos(pitch),
  ];
  const base = (relief.topAt(x, y) + relief.topAt(x + dx, y + dy) + relief.topAt(x - dx, y - dy)) / 3;
  const at = pose(
    x - Math.cos(yaw) * Math.cos(pitch) * (lengthCm / 2),
    y - Math.sin(yaw) * Math.cos(pitch) * (lengthCm / 2),
    0,
    { yaw, pitch, roll: random() * 6.283 },
  );
  const laid = parts.map((part) => ({ ...part, mesh: posed(part.mesh, at) }));
  const lowest = Math.min(...laid.map(({ mesh }) => lowestOf(mesh)));
  if (!isFlat) {
    // Sand drifts to one side of what lies on it, and is scoured from the other.
    const drift = random() * 6.283;
    const reach = radiusCm * 2.2 + lengthCm * 0.25;
    const [c, s] = [Math.cos(yaw), Math.sin(yaw)];
    relief.model(x, y, reach * 1.6, (ox, oy) => {
      const [a, b] = [(ox * c + oy * s) / (lengthCm * 0.62), (-ox * s + oy * c) / (radiusCm * 1.9)];
      const side = (ox * Math.cos(drift) + oy * Math.sin(drift)) / reach;
      return (
        Math.exp(-(a * a + b * b) * 1.3) * (0.35 * radiusCm * Math.max(0, 0.35 + side) - 0.12 * radiusCm)
      );
    });
  }
  return laid.map((part) => ({ ...part, mesh: raised(part.mesh, base - buried - lowest) }));
}
