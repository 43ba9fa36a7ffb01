import type { Light, Rgb } from "./light";
import { between, type Random } from "./random";

const WEATHERS = ["overcast", "low", "noon", "dusk", "hazy", "low"] as const;

/** Overcast, bright noon, low sun, dusk, or a hazy day. */
export function daylight(seed: number, random: Random): { light: Light; exposure: number; warmth: number } {
  const angle = random() * 6.283;
  // Neighbouring seeds get different light, so that a batch of any size has all of it.
  const kind = WEATHERS[seed % WEATHERS.length] ?? "hazy";
  const bounce: Rgb = [0.3, 0.25, 0.19];
  switch (kind) {
    case "overcast":
      return {
        light: {
          angle,
          elevation: 1.1,
          sun: [0.5, 0.5, 0.5],
          zenith: [0.95, 1, 1.06],
          horizon: [0.85, 0.89, 0.94],
          bounce,
          softness: 0.45,
        },
        exposure: 0.27,
        warmth: -0.02,
      };
    case "noon":
      return {
        light: {
          angle,
          elevation: between(random, 0.9, 1.15),
          sun: [2.5, 2.36, 2.1],
          zenith: [0.5, 0.62, 0.82],
          horizon: [0.8, 0.88, 0.95],
          bounce,
          softness: 0.035,
        },
        exposure: 0.3,
        warmth: 0.01,
      };
    case "low":
      return {
        light: {
          angle,
          elevation: between(random, 0.27, 0.48),
          sun: [2.7, 2.1, 1.4],
          zenith: [0.4, 0.48, 0.63],
          horizon: [0.85, 0.76, 0.64],
          bounce,
          softness: 0.03,
        },
        exposure: 0.25,
        warmth: 0.03,
      };
    case "dusk":
      return {
        light: {
          angle,
          elevation: between(random, 0.2, 0.3),
          sun: [1.1, 0.62, 0.4],
          zenith: [0.4, 0.45, 0.62],
          horizon: [0.75, 0.58, 0.56],
          bounce: [0.2, 0.17, 0.18],
          softness: 0.07,
        },
        exposure: 0.165,
        warmth: 0.01,
      };
    case "hazy":
      return {
        light: {
          angle,
          elevation: between(random, 0.6, 0.95),
          sun: [1.5, 1.42, 1.3],
          zenith: [0.75, 0.8, 0.88],
          horizon: [0.85, 0.87, 0.88],
          bounce,
          softness: 0.12,
        },
        exposure: 0.28,
        warmth: 0,
      };
  }
}
