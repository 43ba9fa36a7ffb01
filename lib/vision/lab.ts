import type { Raster } from "./raster";

/** CIE L*a*b* (D65) planes of a picture; L 0..100, a and b about -100..100. */
export type Lab = { width: number; height: number; l: Float32Array; a: Float32Array; b: Float32Array };

const LINEAR = Float32Array.from({ length: 256 }, (_, value) => {
  const channel = value / 255;
  return channel <= 0.04045 ? channel / 12.92 : ((channel + 0.055) / 1.055) ** 2.4;
});

const CURVE_STEPS = 4096;
/** f of the CIE 1976 formula over 0..1.1, tabulated: the cube root with its linear foot. */
const CURVE = Float32Array.from({ length: CURVE_STEPS + 2 }, (_, index) => {
  const t = (index / CURVE_STEPS) * 1.1;
  return t > 216 / 24389 ? Math.cbrt(t) : ((24389 / 27) * t + 16) / 116;
});

const curve = (t: number): number => CURVE[Math.min(CURVE_STEPS + 1, ((t / 1.1) * CURVE_STEPS + 0.5) | 0)]!;

/** sRGB (IEC 61966-2-1) to CIE 1976 L*a*b* under D65, to about 0.1 by table. O(pixels). */
export function toLab({ width, height, data }: Raster): Lab {
  const count = width * height;
  const l = new Float32Array(count);
  const a = new Float32Array(count);
  const b = new Float32Array(count);
  for (let i = 0, at = 0; i < count; i++, at += 3) {
    const red = LINEAR[data[at]!]!;
    const green = LINEAR[data[at + 1]!]!;
    const blue = LINEAR[data[at + 2]!]!;
    const x = curve((0.4124564 * red + 0.3575761 * green + 0.1804375 * blue) / 0.95047);
    const y = curve(0.2126729 * red + 0.7151522 * green + 0.072175 * blue);
    const z = curve((0.0193339 * red + 0.119192 * green + 0.9503041 * blue) / 1.08883);
    l[i] = 116 * y - 16;
    a[i] = 500 * (x - y);
    b[i] = 200 * (y - z);
  }
  return { width, height, l, a, b };
}

/** A plane after a small binomial blur (1 4 6 4 1) in both directions, edges repeated. O(pixels). */
export function blur(plane: Float32Array, width: number, height: number): Float32Array {
  const across = new Float32Array(plane.length);
  const out = new Float32Array(plane.length);
  const right = width - 1;
  for (let y = 0; y < height; y++) {
    const row = y * width;
    for (let x = 0; x < width; x++) {
      const p0 = plane[row + (x > 1 ? x - 2 : 0)]!;
      const p1 = plane[row + (x > 0 ? x - 1 : 0)]!;
      const p3 = plane[row + (x < right ? x + 1 : right)]!;
      const p4 = plane[row + (x + 1 < right ? x + 2 : right)]!;
      across[row + x] = (p0 + p4 + 4 * (p1 + p3) + 6 * plane[row + x]!) / 16;
    }
  }
  for (let y = 0; y < height; y++) {
    const r0 = Math.max(0, y - 2) * width;
    const r1 = Math.max(0, y - 1) * width;
    const r2 = y * width;
    const r3 = Math.min(height - 1, y + 1) * width;
    const r4 = Math.min(height - 1, y + 2) * width;
    for (let x = 0; x < width; x++) {
      out[r2 + x] =
        (across[r0 + x]! + across[r4 + x]! + 4 * (across[r1 + x]! + across[r3 + x]!) + 6 * across[r2 + x]!) /
        16;
    }
  }
  return out;
}

/** The three planes blurred alike. */
export function blurLab(lab: Lab): Lab {
  const soft = (plane: Float32Array) => blur(plane, lab.width, lab.height);
  return { ...lab, l: soft(lab.l), a: soft(lab.a), b: soft(lab.b) };
}
