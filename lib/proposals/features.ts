import type { Region } from "./regions";

/** Numbers that say how much a region looks like one object, each about -2..2. Order is part of the weights. */
export function regionFeatures(region: Region, width: number, height: number): number[] {
  const w = region.right - region.left + 1;
  const h = region.bottom - region.top + 1;
  const pixels = width * height;
  const share = region.areaPx2 / pixels;
  const fill = region.areaPx2 / (w * h);
  const logSize = Math.log10(share + 1e-6);
  const centreX = (region.left + region.right + 1) / 2 / width - 0.5;
  const centreY = (region.top + region.bottom + 1) / 2 / height - 0.5;
  const aspect = Math.abs(Math.log2(w / h));
  const strength = Math.log2(1 + region.borderStrength);
  const inner = Math.log2(1 + region.innerStrength);
  return [
    1,
    strength / 2,
    (strength - inner) / 2,
    inner / 2,
    1 - region.likeNeighbours,
    (1 - region.likeNeighbours) * strength,
    region.atEdge * 2,
    fill * 2 - 1,
    (fill * 2 - 1) ** 2,
    (logSize + 2.5) / 1.5,
    ((logSize + 2.5) / 1.5) ** 2,
    aspect / 2,
    (centreX ** 2 + centreY ** 2) * 4,
    Math.min(1, region.members.length / 12),
    w >= width * 0.95 || h >= height * 0.95 ? 1 : 0,
    Math.sqrt(share) * 2,
  ];
}

export const FEATURE_COUNT = 16;
