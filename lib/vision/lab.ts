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

const curve = (t: number): number => CURVE[Math.min(CURVE_STEPS + 1, (t / 1.1) * CURVE_STEPS) | 0]!;

/** sRGB (IEC 61966-2-1) to CIE 1976 L*a*b* under D65. O(pixels). */
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

/** A plane after a small binomial blur (1 4 6 4 1) in both directions, edges repeated. */
export function blur(plane: Float32Array, width: number, height: number): Float32Array {
  const across = new Float32Array(plane.length);
  const out = new Float32Array(plane.length);
  for (let y = 0; y < height; y++) {
    const row = y * width;
    for (let x = 0; x < width; x++) {
      const at = (dx: number) => plane[row + Math.min(width - 1, Math.max(0, x + dx))]!;
      across[row + x] = (at(-2) + 4 * at(-1) + 6 * at(0) + 4 * at(1) + at(2)) / 16;
    }
  }
  for (let y = 0; y < height; y++) {
    const rows = [-2, -1, 0, 1, 2].map((dy) => Math.min(height - 1, Math.max(0, y + dy)) * width);
    const [r0, r1, r2, r3, r4] = rows as [number, number, number, number, number];
    for (let x = 0; x < width; x++) {
      out[y * width + x] =
        (across[r0 + x]! +
          4 * across[r1 + x]! +
          6 * across[r2 + x]! +
          4 * across[r3 + x]! +
          across[r4 + x]!) /
        16;
    }
  }
  return out;
}
