import { hash } from "./random";

export type LensPlan = { exposure: number; blurPx: number; vignette: number; noise: number; warmth: number };

/**
 * What a small camera makes of linear light: blur, bloom, fall-off to the corners, exposure to the picture's own
 * brightness, a film-like curve (fit by Narkowicz, 2015) and sensor noise. r, g, b bytes. O(pixels).
 */
export function develop(
  linear: Float32Array,
  width: number,
  height: number,
  plan: LensPlan,
  seed: number,
): Uint8Array {
  const sharp = blurred(linear, width, height, plan.blurPx);
  const gain = plan.exposure / meanLight(sharp);
  const glow = bloom(sharp, width, height, gain);
  const out = new Uint8Array(width * height * 3);
  const balance = [1 + plan.warmth, 1, 1 - plan.warmth];
  const small = Math.ceil(width / BLOOM_STEP);
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const i = (y * width + x) * 3;
      const dx = (2 * x) / width - 1;
      const dy = (2 * y) / height - 1;
      const fall = 1 - plan.vignette * (dx * dx + dy * dy) * 0.5;
      const g = (Math.floor(y / BLOOM_STEP) * small + Math.floor(x / BLOOM_STEP)) * 3;
      // One hash carries three small numbers for the channels; a second makes the grey part bell-shaped.
      const bits = Math.floor(hash(x, y, seed) * 1073741824);
      const grey = hash(x, y, seed + 1) + (bits & 1023) / 1023 - 1;
      for (let k = 0; k < 3; k++) {
        const light = (sharp[i + k]! + glow[g + k]!) * gain * fall * balance[k]!;
        const value = curve(light);
        const speck =
          (0.7 * grey + 0.5 * (((bits >> (10 * k)) & 1023) / 1023 - 0.5)) *
          plan.noise *
          (0.4 + 0.6 * Math.sqrt(Math.max(0, 1 - value)));
        out[i + k] = Math.max(0, Math.min(255, (encoded(value) + speck) * 255 + 0.5));
      }
    }
  }
  return out;
}

const curve = (x: number): number =>
  Math.max(0, Math.min(1, (x * (2.51 * x + 0.03)) / (x * (2.43 * x + 0.59) + 0.14)));

const GAMMA = Float32Array.from({ length: 4097 }, (_, i) => {
  const x = i / 4096;
  return x <= 0.0031308 ? 12.92 * x : 1.055 * x ** (1 / 2.4) - 0.055;
});
/** The sRGB transfer function (IEC 61966-2-1), from a table. */
const encoded = (x: number): number => GAMMA[Math.round(x * 4096)]!;

function meanLight(linear: Float32Array): number {
  let sum = 0;
  let count = 0;
  for (let i = 0; i < linear.length; i += 3 * 17, count++) {
    sum += Math.log(0.02 + 0.25 * linear[i]! + 0.6 * linear[i + 1]! + 0.15 * linear[i + 2]!);
  }
  return Math.exp(sum / count);
}

const BLOOM_STEP = 8;

/** Light beyond white, spread over its surroundings, at an eighth of the size. */
function bloom(linear: Float32Array, width: number, height: number, gain: number): Float32Array {
  const columns = Math.ceil(width / BLOOM_STEP);
  const rows = Math.ceil(height / BLOOM_STEP);
  const small = new Float32Array(columns * rows * 3);
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const to = (Math.floor(y / BLOOM_STEP) * columns + Math.floor(x / BLOOM_STEP)) * 3;
      for (let k = 0; k < 3; k++) {
        const over = Math.min(8 / gain, linear[(y * width + x) * 3 + k]! - 1.3 / gain);
        if (over > 0) small[to + k]! += over / (BLOOM_STEP * BLOOM_STEP);
      }
    }
  }
  const soft = blurred(small, columns, rows, 1.6);
  return soft.map((value) => value * 0.35);
}

/** Gaussian blur of r, g, b with a spread of `sigma` px; edges repeat. */
function blurred(from: Float32Array, width: number, height: number, sigma: number): Float32Array {
  const reach = Math.max(1, Math.ceil(sigma * 2.2));
  const weights = Array.from({ length: 2 * reach + 1 }, (_, k) =>
    Math.exp(-((k - reach) ** 2) / (2 * sigma * sigma)),
  );
  const total = weights.reduce((sum, weight) => sum + weight, 0);
  const kernel = Float32Array.from(weights, (weight) => weight / total);
  const across = new Float32Array(from.length);
  const line = width * 3;
  for (let y = 0; y < height; y++) {
    const start = y * line;
    for (let x = 0; x < line; x++) {
      let sum = 0;
      if (x >= reach * 3 && x < line - reach * 3) {
        for (let k = 0, i = start + x - reach * 3; k <= 2 * reach; k++, i += 3) sum += kernel[k]! * from[i]!;
      } else {
        const channel = x % 3;
        for (let k = 0; k <= 2 * reach; k++) {
          const at = Math.min(line - 3 + channel, Math.max(channel, x + (k - reach) * 3));
          sum += kernel[k]! * from[start + at]!;
        }
      }
      across[start + x] = sum;
    }
  }
  const down = new Float32Array(from.length);
  for (let y = 0; y < height; y++) {
    for (let k = -reach; k <= reach; k++) {
      const source = Math.min(height - 1, Math.max(0, y + k)) * line;
      const weight = kernel[k + reach]!;
      for (let x = 0; x < line; x++) down[y * line + x]! += weight * across[source + x]!;
    }
  }
  return down;
}
