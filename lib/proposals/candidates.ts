import type { Box } from "@/lib/geometry/types";
import { blur, toLab, type Lab } from "@/lib/vision/lab";
import type { Raster } from "@/lib/vision/raster";
import { segment, type Segments } from "@/lib/vision/segments";
import { regionFeatures } from "./features";
import { groupRegions, type Region } from "./regions";
import { OBJECTNESS } from "./weights/objectness";

/** Side at which a picture is segmented: finer finds no more objects, only more time. */
export const WORK_SIDE_PX = 480;
/** Scales of the segmentation: small k finds small parts, large k whole things. */
const SCALES = [40, 100, 220] as const;
export type Candidate = { region: Region; segments: Segments; features: number[] };

/** Every region of a picture at all scales, with its features, in px of the small copy. */
export function candidates(small: Raster): Candidate[] {
  const lab = smooth(toLab(small));
  const sizeMin = Math.max(12, Math.round((small.width * small.height) / 9000));
  return SCALES.flatMap((k) => {
    const segments = segment(lab, k, sizeMin);
    return groupRegions(segments, lab).map((region) => ({
      region,
      segments,
      features: regionFeatures(region, small.width, small.height),
    }));
  });
}

/** Probability of the logistic model for features. */
export function objectness(features: readonly number[], weights: readonly number[] = OBJECTNESS): number {
  const sum = features.reduce((total, value, index) => total + value * (weights[index] ?? 0), 0);
  return 1 / (1 + Math.exp(-sum));
}

export function boxOfRegion(region: Region): Box {
  return [region.left, region.top, region.right - region.left + 1, region.bottom - region.top + 1];
}

function smooth(lab: Lab): Lab {
  const soft = (plane: Float32Array) => blur(plane, lab.width, lab.height);
  return { ...lab, l: soft(lab.l), a: soft(lab.a), b: soft(lab.b) };
}

/** A copy whose longer side is at most `side` px, by averaging over the pixels that each new one covers. */
export function shrink(raster: Raster, side: number): Raster {
  const factor = Math.min(1, side / Math.max(raster.width, raster.height));
  if (factor === 1) return raster;
  const width = Math.max(1, Math.round(raster.width * factor));
  const height = Math.max(1, Math.round(raster.height * factor));
  const data = new Uint8Array(width * height * 3);
  for (let y = 0; y < height; y++) {
    const fromY = Math.floor((y * raster.height) / height);
    const toY = Math.max(fromY + 1, Math.floor(((y + 1) * raster.height) / height));
    for (let x = 0; x < width; x++) {
      const fromX = Math.floor((x * raster.width) / width);
      const toX = Math.max(fromX + 1, Math.floor(((x + 1) * raster.width) / width));
      let red = 0;
      let green = 0;
      let blue = 0;
      for (let py = fromY; py < toY; py++) {
        for (let px = fromX; px < toX; px++) {
          const at = (py * raster.width + px) * 3;
          red += raster.data[at]!;
          green += raster.data[at + 1]!;
          blue += raster.data[at + 2]!;
        }
      }
      const n = (toY - fromY) * (toX - fromX);
      const at = (y * width + x) * 3;
      data[at] = red / n;
      data[at + 1] = green / n;
      data[at + 2] = blue / n;
    }
  }
  return { width, height, data };
}
