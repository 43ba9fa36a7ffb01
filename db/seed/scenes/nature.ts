import type { Material } from "./film";
import type { Placed } from "./litter";
import { lettuceMaterial, shellMaterial, stoneMaterial, weedMaterial, woodMaterial } from "./materials";
import { band, pose, posed, sheet, smoothCurve, tube, wandering, type Mesh, type Vec } from "./mesh";
import { between, nearZero, wholeBetween, type Random } from "./random";
import { CLOUD, GRIT, tap } from "./texture";

type TopAt = (x: number, y: number) => number;

const solid = (mesh: Mesh, material: Material): Placed => ({ mesh, material, isClear: false });

/** Lets a curve down on what lies below it, `over` cm above. */
function laid(curve: readonly Vec[], topAt: TopAt, over: (i: number) => number): Vec[] {
  return curve.map(([x, y], i) => [x, y, topAt(x, y) + over(i)]);
}

/** Bladder wrack: flat fronds that fork and fork again, with air bladders in pairs and swollen tips. */
export function wrack(x: number, y: number, topAt: TopAt, size: number, random: Random): Placed[] {
  const dryness = Math.min(1, Math.max(0, random() * 1.3 - 0.15));
  const material = weedMaterial(random, dryness);
  const tipMaterial = weedMaterial(random, dryness * 0.4);
  const parts: Placed[] = [];
  const hasBladders = random() < 0.7;
  const lift = between(random, 0.1, 1.2);
  const grow = (fx: number, fy: number, angle: number, level: number, width: number): void => {
    const length = size * between(random, 2.6, 5.2);
    const path = wandering(fx, fy, angle, { steps: 2, stepCm: length / 2, stray: 0.5 }, random);
    const curve = laid(smoothCurve(path, 3), topAt, () => 0.12 + lift * random() * 0.5);
    parts.push(
      solid(
        band(
          curve,
          2,
          (u) => width * (0.85 + 0.25 * Math.sin(u * 9)),
          (_, side) => (1 - side * side) * 0.16,
        ),
        material,
      ),
    );
    const [ex, ey] = [path.at(-1)?.[0] ?? fx, path.at(-1)?.[1] ?? fy];
    if (hasBladders && level > 0 && random() < 0.75) {
      for (const side of [-1, 1]) {
        const r = between(random, 0.28, 0.5) * size;
        const [bx, by] = [
          ex - Math.cos(angle) * length * 0.3 - Math.sin(angle) * side * r * 0.9,
          ey - Math.sin(angle) * length * 0.3 + Math.cos(angle) * side * r * 0.9,
        ];
        parts.push(
          solid(
            ball(bx, by, topAt(bx, by) + r * 0.7, [r * 1.35, r, r * 0.8], angle, 7, 8, random, 0),
            tipMaterial,
          ),
        );
      }
    }
    if (level === 0) {
      if (random() < 0.4)
        parts.push(
          solid(
            ball(
              ex,
              ey,
              topAt(ex, ey) + 0.3,
              [0.75 * size, 0.45 * size, 0.35 * size],
              angle,
              6,
              8,
              random,
              0,
            ),
            tipMaterial,
          ),
        );
      return;
    }
    const spread = between(random, 0.28, 0.6);
    const heading =
      path.length > 1 ? Math.atan2(ey - path[path.length - 2]![1], ex - path[path.length - 2]![0]) : angle;
    grow(ex, ey, heading - spread, level - 1, width * 0.93);
    if (random() < 0.9) grow(ex, ey, heading + spread, level - 1, width * 0.93);
  };
  const stems = wholeBetween(random, 1, 3);
  for (let stem = 0; stem < stems; stem++)
    grow(x, y, random() * 6.283, wholeBetween(random, 2, 3), between(random, 0.32, 0.55) * size);
  return parts;
}

/** Kelp: a stalk and long leathery straps with wavy edges. */
export function kelp(x: number, y: number, topAt: TopAt, random: Random): Placed[] {
  const material = weedMaterial(random, random() * 0.5);
  const heading = random() * 6.283;
  const parts: Placed[] = [];
  const stalk = wandering(
    x,
    y,
    heading + Math.PI,
    { steps: 5, stepCm: between(random, 3, 6), stray: 0.35 },
    random,
  );
  parts.push(
    solid(
      tube(
        laid(smoothCurve(stalk, 5), topAt, () => 0.5),
        7,
        (u) => 0.75 - 0.2 * u,
      ),
      material,
    ),
  );
  const straps = wholeBetween(random, 2, 6);
  for (let strap = 0; strap < straps; strap++) {
    const half = between(random, 1, 2.4);
    const path = wandering(
      x,
      y,
      heading + nearZero(random) * 0.9,
      { steps: wholeBetween(random, 5, 9), stepCm: between(random, 4, 6), stray: 0.5 },
      random,
    );
    const shift = random() * 512;
    const curve = laid(smoothCurve(path, 5), topAt, () => 0.25 + strap * 0.12);
    const mesh = band(
      curve,
      6,
      (u) => half * Math.min(1, 4 * u + 0.25) * (1 - 0.75 * u * u),
      (u, side) =>
        0.35 * (1 - side * side) + Math.abs(side) * 0.7 * (0.5 + tap(CLOUD, u * 150 + shift, side * 14)),
    );
    parts.push(solid(mesh, material));
  }
  return parts;
}

/** Eelgrass and chopped bits: narrow dry blades, most of the mat of a wrack line. */
export function blade(x: number, y: number, angle: number, topAt: TopAt, random: Random): Placed[] {
  const material = weedMaterial(random, between(random, 0.35, 1.2));
  const isLong = random() < 0.35;
  const path = wandering(
    x,
    y,
    angle,
    { steps: isLong ? 4 : 2, stepCm: between(random, 1.6, isLong ? 5.5 : 3.5), stray: 0.7 },
    random,
  );
  const half = between(random, 0.1, 0.3);
  const curve = laid(smoothCurve(path, 3), topAt, () => 0.08 + random() * 0.4);
  return [
    solid(
      band(
        curve,
        2,
        (u) => half * (1 - 0.6 * u),
        (_, side) => (1 - side * side) * 0.12,
      ),
      material,
    ),
  ];
}

/** Green sheets, crumpled and thin. */
export function lettuce(x: number, y: number, topAt: TopAt, random: Random): Placed[] {
  const material = lettuceMaterial(random);
  const radius = between(random, 1.4, 3.6);
  const shift = random() * 512;
  const [stretch, turn] = [between(random, 0.4, 0.9), random() * 3.14];
  const mesh = sheet(8, 40, true, (u, v, out) => {
    const angle = v * 6.283;
    const r =
      u * radius * Math.max(0.25, 1 + 0.85 * tap(CLOUD, Math.cos(angle) * 34 + shift, Math.sin(angle) * 34));
    const [a, b] = [Math.cos(angle) * r, Math.sin(angle) * r * stretch];
    const [px, py] = [
      x + a * Math.cos(turn) - b * Math.sin(turn),
      y + a * Math.sin(turn) + b * Math.cos(turn),
    ];
    out[0] = px;
    out[1] = py;
    out[2] = topAt(px, py) + 0.1 + 0.6 * u * (0.7 + tap(GRIT, a * 4 + shift, b * 4));
  });
  return [solid(mesh, material)];
}

/** An ellipsoid at a place, its surface pushed in and out by `rough`. Its material sees a unit ball. */
export function ball(
  x: number,
  y: number,
  z: number,
  [a, b, c]: Vec,
  yaw: number,
  rows: number,
  sides: number,
  random: Random,
  rough: number,
): Mesh {
  const shift = random() * 512;
  const mesh = sheet(rows, sides, true, (u, v, out) => {
    const [polar, angle] = [u * Math.PI, v * 2 * Math.PI];
    const [dx, dy, dz] = [
      -Math.cos(polar),
      Math.sin(polar) * Math.cos(angle),
      Math.sin(polar) * Math.sin(angle),
    ];
    const r =
      rough > 0
        ? 1 +
          rough *
            (tap(CLOUD, dx * 22 + shift, dy * 22 + dz * 15) +
              0.4 * tap(CLOUD, dy * 50 + shift, dz * 50 + dx * 30))
        : 1;
    out[0] = dx * r;
    out[1] = dy * r;
    out[2] = dz * r;
  });
  // Scaled after the noise, so that the material still sees a unit ball.
  const at = pose(x, y, z, { yaw });
  at.turn.forEach((value, i) => (at.turn[i] = value * [a, b, c][i % 3]!));
  const laidDown = posed(mesh, at);
  for (let i = 0; i < laidDown.normals.length; i += 3) squareUp(laidDown.normals, i, yaw, a, b, c);
  return laidDown;
}

/** Normals of a scaled ball go with one over the scale squared, as `posed` has scaled them already. */
function squareUp(normals: Float32Array, i: number, yaw: number, a: number, b: number, c: number): void {
  const [cos, sin] = [Math.cos(yaw), Math.sin(yaw)];
  const [nx, ny, nz] = [normals[i]!, normals[i + 1]!, normals[i + 2]!];
  const along = (nx * cos + ny * sin) / (a * a);
  const across = (-nx * sin + ny * cos) / (b * b);
  const up = nz / (c * c);
  const length = Math.hypot(along, across, up) || 1;
  normals[i] = (along * cos - across * sin) / length;
  normals[i + 1] = (along * sin + across * cos) / length;
  normals[i + 2] = up / length;
}

/** A pebble, partly sunk in the sand. `damp` 0..1. */
export function pebble(
  x: number,
  y: number,
  radius: number,
  topAt: TopAt,
  damp: number,
  random: Random,
): Placed {
  const [a, b, c] = [radius, radius * between(random, 0.6, 0.95), radius * between(random, 0.35, 0.65)];
  const isSmall = radius < 0.7;
  const mesh = ball(
    x,
    y,
    topAt(x, y) + c * between(random, 0.1, 0.6),
    [a, b, c],
    random() * 3.14,
    isSmall ? 6 : 14,
    isSmall ? 8 : 20,
    random,
    between(random, 0.04, 0.14),
  );
  return solid(mesh, stoneMaterial(random, damp));
}

/** A cockle or a mussel, hollow side down or up. */
export function shell(x: number, y: number, topAt: TopAt, random: Random): Placed {
  const isMussel = random() < 0.3;
  const radius = isMussel ? between(random, 1.6, 2.8) : between(random, 0.9, 2.2);
  const ribs = isMussel ? 0 : 0.05;
  const dome = between(random, 0.35, 0.55);
  const mesh = sheet(12, isMussel ? 16 : 48, false, (u, v, out) => {
    const angle = (v - 0.5) * (isMussel ? 2.2 : 2.9);
    const r = u * radius * (isMussel ? 1.6 * Math.cos(angle * 0.7) : 1 + 0.12 * Math.cos(angle * 2));
    out[0] = Math.cos(angle) * r;
    out[1] = Math.sin(angle) * r * (isMussel ? 0.75 : 0.9);
    const rise = Math.sin(Math.min(1, u * 1.02) * Math.PI) * 0.8 + (1 - u) * 0.45;
    out[2] = radius * dome * rise * Math.cos(angle * 0.5) * (1 + ribs * Math.cos(v * 6.283 * 16) * 2);
  });
  const laidDown = posed(
    mesh,
    pose(x, y, topAt(x, y) - 0.05, {
      yaw: random() * 6.283,
      pitch: nearZero(random) * 0.3,
      roll: nearZero(random) * 0.4 + (random() < 0.2 ? Math.PI : 0),
    }),
  );
  return solid(laidDown, shellMaterial(random, isMussel));
}

/** A bleached branch with a stub or two. */
export function driftwood(x: number, y: number, topAt: TopAt, random: Random): Placed[] {
  const material = woodMaterial(random);
  const thick = between(random, 0.9, 3);
  const heading = random() * 6.283;
  const path = wandering(x, y, heading, { steps: 6, stepCm: between(random, 4, 8), stray: 0.28 }, random);
  const [endX, endY] = [path.at(-1)?.[0] ?? x, path.at(-1)?.[1] ?? y];
  const [from, to] = [topAt(x, y), topAt(endX, endY)];
  const curve = smoothCurve(path, 7).map(([px, py], i, { length }): Vec => [
    px,
    py,
    from + ((to - from) * i) / (length - 1) + thick * 0.3,
  ]);
  const shift = random() * 512;
  const branch = (points: Vec[], r: number) =>
    solid(
      tube(
        points,
        16,
        (u, angle) => r * (1 - 0.45 * u) * (1 + 0.22 * tap(CLOUD, u * 70 + shift, angle * 12)),
      ),
      material,
    );
  const parts = [branch(curve, thick)];
  const stubs = wholeBetween(random, 0, 2);
  for (let stub = 0; stub < stubs; stub++) {
    const root = curve[Math.floor(curve.length * between(random, 0.2, 0.8))] ?? [x, y, 0];
    const turn = heading + (random() < 0.5 ? 1 : -1) * between(random, 0.5, 1.1);
    const points = [0, 1, 2, 3].map((k): Vec => [
      root[0] + Math.cos(turn) * k * thick * 1.2,
      root[1] + Math.sin(turn) * k * thick * 1.2,
      root[2] + k * 0.2,
    ]);
    parts.push(branch(smoothCurve(points, 4), thick * 0.5));
  }
  return parts;
}
