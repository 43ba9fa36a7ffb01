import type { Film, Layer } from "./film";
import { hash } from "./random";
import type { Relief, Sun } from "./relief";

export type Rgb = readonly [number, number, number];

/** Light on a scene: a sun at an angle on the ground and an elevation (radians), a sky, and what the ground throws back. */
export type Light = {
  angle: number;
  elevation: number;
  sun: Rgb;
  zenith: Rgb;
  horizon: Rgb;
  bounce: Rgb;
  /** How fast shadows soften with distance. */
  softness: number;
  /** Share of the sun that reaches a place on the ground, for glazing bars and clouds. */
  gobo?: (x: number, y: number) => number;
};

/** Lights the solid layer, then lays the clear layer over it. Linear r, g, b per pixel. O(pixels). */
export function expose(film: Film, relief: Relief, light: Light): Float32Array {
  const { width, height } = film.camera;
  const out = new Float32Array(width * height * 3);
  shade(film, film.solid, relief, light, out, undefined);
  shade(film, film.clear, relief, light, out, out.slice());
  return out;
}

/** How the sun stands for a relief. */
export function sunOf({ angle, elevation }: Light): Sun {
  return { dx: Math.cos(angle), dy: Math.sin(angle), rise: Math.tan(elevation) };
}

function shade(
  film: Film,
  layer: Layer,
  relief: Relief,
  light: Light,
  out: Float32Array,
  behind: Float32Array | undefined,
): void {
  const { width, height, focalPx, eye, right, up, forward } = film.camera;
  const { nearness, normal, colour, finish } = layer;
  const sx = Math.cos(light.angle) * Math.cos(light.elevation);
  const sy = Math.sin(light.angle) * Math.cos(light.elevation);
  const sz = Math.sin(light.elevation);
  const { sun, zenith, horizon, bounce, gobo, softness } = light;
  const lift = relief.cellCm * 0.8;
  for (let y = 0, i = 0; y < height; y++) {
    for (let x = 0; x < width; x++, i++) {
      if (nearness[i] === 0) continue;
      // Something solid in front of a clear thing has already been drawn over it.
      if (behind && film.solid.nearness[i]! > nearness[i]!) continue;
      const depth = 1 / nearness[i]!;
      const a = (x + 0.5 - width / 2) / focalPx;
      const b = (height / 2 - y - 0.5) / focalPx;
      const rx = forward[0] + a * right[0] + b * up[0];
      const ry = forward[1] + a * right[1] + b * up[1];
      const rz = forward[2] + a * right[2] + b * up[2];
      const wx = eye[0] + depth * rx;
      const wy = eye[1] + depth * ry;
      const wz = eye[2] + depth * rz;
      const nx = normal[i * 3]!;
      const ny = normal[i * 3 + 1]!;
      const nz = normal[i * 3 + 2]!;
      const inverse = -1 / Math.sqrt(rx * rx + ry * ry + rz * rz);
      const vx = rx * inverse;
      const vy = ry * inverse;
      const vz = rz * inverse;
      const nv = Math.max(0.02, nx * vx + ny * vy + nz * vz);
      const ns = nx * sx + ny * sy + nz * sz;
      const gloss = finish[i * 4]!;
      const metal = finish[i * 4 + 1]!;
      const thin = finish[i * 4 + 2]!;
      const opacity = finish[i * 4 + 3]!;
      let lit = 0;
      if (ns > -0.1 || thin > 0) {
        lit = relief.sunAt(wx + nx * lift, wy + ny * lift, wz + nz * lift, softness, hash(x, y, 5));
        if (gobo) lit *= gobo(wx, wy);
      }
      const sky = relief.skyAt(wx, wy, wz);
      // A little light wraps round grains and fibres, so the terminator is not a hard line.
      const direct = (Math.max(0, ns * 0.92 + 0.08) + thin * Math.max(0, 0.35 - 0.65 * ns)) * lit;
      const upness = 0.5 + 0.5 * nz;
      let highlight = 0;
      let fresnel = 0;
      let mirrorZ = 0;
      if (gloss > 0.05) {
        const away = 1 - nv;
        fresnel = (0.04 + 0.96 * away * away * away * away * away) * Math.min(1, gloss * 1.6);
        mirrorZ = 2 * nv * nz - vz;
        const hx = sx + vx;
        const hy = sy + vy;
        const hz = sz + vz;
        const nh = (nx * hx + ny * hy + nz * hz) / Math.sqrt(hx * hx + hy * hy + hz * hz);
        if (ns > 0 && nh > 0.6 && lit > 0) {
          const power = 2 ** (3 + gloss * 8);
          highlight = nh ** power * (power + 8) * 0.02 * lit * Math.min(1, 2 * gloss);
        }
      }
      const skyShine = 0.35 + 0.65 * sky;
      const shadowed = (1 - upness) * (0.3 + 0.7 * sky);
      const climb = mirrorZ > 0 ? Math.sqrt(mirrorZ) : 0;
      const dip = mirrorZ < 0 ? Math.min(1, -3 * mirrorZ) : 0;
      for (let k = 0; k < 3; k++) {
        const albedo = colour[i * 3 + k]!;
        const body =
          albedo *
          (1 - metal * 0.85) *
          (sun[k]! * direct + zenith[k]! * upness * sky + bounce[k]! * shadowed);
        const level = horizon[k]!;
        const seen = level + (zenith[k]! - level) * climb + (bounce[k]! * 0.7 - level) * dip;
        const tint = albedo * metal;
        const shine =
          (fresnel + tint) * seen * skyShine + (0.04 + fresnel * 0.5 + tint * 0.6) * highlight * sun[k]!;
        if (!behind) {
          out[i * 3 + k] = body + shine;
        } else {
          const bend = opacity < 1 ? offset(nx, ny, right, up, x, y, width, height) : i;
          // Light that passes a clear wall twice is tinted twice, and more at the rim where the wall is seen on edge.
          const rim = (1 - nv) ** 2;
          const passed = behind[bend * 3 + k]! * albedo ** (0.45 + rim) * (1 - 0.5 * rim);
          out[i * 3 + k] = opacity * body + (1 - opacity) * passed + shine * (1 + (1 - opacity));
        }
      }
    }
  }
}

/** Pixel that is seen through a curved clear wall here. */
function offset(
  nx: number,
  ny: number,
  right: readonly number[],
  up: readonly number[],
  x: number,
  y: number,
  width: number,
  height: number,
): number {
  const dx = Math.round((nx * right[0]! + ny * right[1]!) * -9);
  const dy = Math.round((nx * up[0]! + ny * up[1]!) * 9);
  return Math.min(height - 1, Math.max(0, y + dy)) * width + Math.min(width - 1, Math.max(0, x + dx));
}
