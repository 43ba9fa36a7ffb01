import { boxIou } from "@/lib/geometry/box";
import { maskFromBytes } from "@/lib/geometry/mask";
import { ringsArea } from "@/lib/geometry/region";
import { simplifyRings } from "@/lib/geometry/simplify";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import { cutRaster, shrinkRaster, type Raster } from "@/lib/vision/raster";
import { candidates, WORK_SIDE_PX, type CandidateSet } from "./candidates";
import { detectExemplars, type ExemplarModel } from "./exemplar";
import { leavesOf } from "./hierarchy";
import { keepProbability, rankCandidates } from "./objectness";
import { tilesOf, type Tile } from "./tiles";

export type Proposal = {
  box: Box;
  rings: Rings;
  /** Probability that a person keeps it, 0..1. */
  score: number;
  classId: string | null;
  source: "region" | "anchor" | "exemplar" | "detector" | "import";
};

export type ProposeOptions = {
  limit?: number;
  /** Raster px for one px of the original; the answer is in px of the original. */
  scale?: number;
  model?: ExemplarModel;
};

const IOU_LOSS_MAX = 0.02;
/** Two finds of one object by different looks (tiles, the model) overlap by more than this. */
const SAME_IOU = 0.55;
/** Kept of one tile before all are merged. */
const TILE_LIMIT = 150;
/** A region that fills less of its tile's cut border is whole; a larger one is better seen in the whole picture. */
const TILE_SHARE_MAX = 0.25;

/**
 * Proposals of one picture, best first: graph segmentation at three scales, two ways of hierarchical grouping, learned
 * ranking, suppression, outlines traced and simplified. Pictures much larger than the working size are also
 * looked at in overlapping tiles. With a model of the batch's own settled labels its detections come first,
 * with their class. Scores are calibrated probabilities. A blank picture has no proposals. Deterministic.
 */
export function propose(raster: Raster, { limit = 100, scale = 1, model }: ProposeOptions = {}): Proposal[] {
  if (raster.width < 4 || raster.height < 4) return [];
  const found: Proposal[] = [];
  for (const tile of tilesOf(raster.width, raster.height)) found.push(...proposeInTile(raster, tile, limit));
  const learned = model ? detectExemplars(raster, model, limit) : [];
  const merged = model && learned.length > 0 ? [...learned, ...found] : found;
  return distinct(merged, limit).map((proposal) => scaled(proposal, 1 / scale));
}

function proposeInTile(raster: Raster, tile: Tile, limit: number): Proposal[] {
  const isWhole = tile.width === raster.width && tile.height === raster.height;
  const part = isWhole ? raster : cutRaster(raster, tile.left, tile.top, tile.width, tile.height);
  const small = shrinkRaster(part, WORK_SIDE_PX);
  const toRaster = { x: part.width / small.width, y: part.height / small.height };
  const set = candidates(small, {
    left: tile.left / toRaster.x,
    top: tile.top / toRaster.y,
    width: raster.width / toRaster.x,
    height: raster.height / toRaster.y,
  });
  const { order, scores, boxes } = rankCandidates(set, isWhole ? limit : Math.min(limit, TILE_LIMIT));
  return order.flatMap((n): Proposal[] => {
    const box = boxes[n];
    if (!box || (!isWhole && !isWithin(box, small, tile, raster))) return [];
    const rings = outlineOf(set, n);
    if (rings.length === 0) return [];
    const place = ([x, y]: Point): Point => [x * toRaster.x + tile.left, y * toRaster.y + tile.top];
    const [left, top] = place([box[0], box[1]]);
    return [
      {
        box: [left, top, box[2] * toRaster.x, box[3] * toRaster.y],
        rings: rings.map((ring): Ring => ring.map(place)),
        score: keepProbability(scores[n] ?? 0),
        classId: null,
        source: "region",
      },
    ];
  });
}

/** Whether a tile shows all of a region: it touches no side that cuts the picture, and is not large in the tile. */
function isWithin([x, y, w, h]: Box, small: Raster, tile: Tile, raster: Raster): boolean {
  if (w * h > TILE_SHARE_MAX * small.width * small.height) return false;
  const cutsLeft = tile.left > 0 && x <= 1;
  const cutsTop = tile.top > 0 && y <= 1;
  const cutsRight = tile.left + tile.width < raster.width && x + w >= small.width - 1;
  const cutsBottom = tile.top + tile.height < raster.height && y + h >= small.height - 1;
  return !(cutsLeft || cutsTop || cutsRight || cutsBottom);
}

/** Best first; of two that overlap by more than `SAME_IOU` the better stays, unless both come from one look. */
function distinct(found: readonly Proposal[], limit: number): Proposal[] {
  const sorted = found
    .map((proposal, index) => ({ proposal, index }))
    .sort((a, b) => b.proposal.score - a.proposal.score || a.index - b.index)
    .map(({ proposal }) => proposal);
  const kept: Proposal[] = [];
  for (const proposal of sorted) {
    if (kept.length >= limit) break;
    // A list of over a hundred asks for every chance, a short one for different objects.
    const iouMax = kept.length < 100 ? SAME_IOU : 0.7;
    if (kept.every((other) => boxIou(other.box, proposal.box) <= iouMax)) kept.push(proposal);
  }
  return kept;
}

function scaled(proposal: Proposal, factor: number): Proposal {
  if (factor === 1) return proposal;
  const [x, y, w, h] = proposal.box;
  return {
    ...proposal,
    box: [x * factor, y * factor, w * factor, h * factor],
    rings: proposal.rings.map((ring): Ring => ring.map(([px, py]): Point => [px * factor, py * factor])),
  };
}

/** The largest part of a candidate's region without its holes, px of the small copy: what a person would begin from. */
export function outlineOf(set: CandidateSet, n: number): Rings {
  const tree = set.hierarchies[set.hierarchy[n]!]!;
  const { label, width, count } = tree.segments;
  const isOwn = new Uint8Array(count);
  for (const leaf of leavesOf(tree, set.node[n]!)) isOwn[leaf] = 1;
  const [left, top, right, bottom] = set.boxes.subarray(n * 4, n * 4 + 4) as unknown as [
    number,
    number,
    number,
    number,
  ];
  const bytes = new Uint8Array((right - left) * (bottom - top));
  for (let y = top, i = 0; y < bottom; y++) {
    for (let x = left; x < right; x++, i++) bytes[i] = isOwn[label[y * width + x]!]!;
  }
  const rings = traceMask(
    maskFromBytes(smoothed(bytes, right - left, bottom - top), right - left, bottom - top),
    8,
  );
  let largest: Ring | undefined;
  let most = 0;
  for (const ring of rings) {
    const area = Math.abs(ringsArea([ring]));
    if (area > most) [largest, most] = [ring, area];
  }
  if (!largest) return [];
  return simplifyRings([largest.map(([x, y]): Point => [x + left, y + top])], IOU_LOSS_MAX);
}

/** Each pixel as most of the 3 x 3 around it are: fringes one pixel wide are the segmentation's, not the object's. */
function smoothed(bytes: Uint8Array, width: number, height: number): Uint8Array {
  if (width < 8 || height < 8) return bytes;
  const out = new Uint8Array(bytes.length);
  for (let y = 0, i = 0; y < height; y++) {
    const up = y > 0 ? -width : 0;
    const down = y + 1 < height ? width : 0;
    for (let x = 0; x < width; x++, i++) {
      const before = x > 0 ? -1 : 0;
      const after = x + 1 < width ? 1 : 0;
      let sum = 0;
      for (const row of [i + up, i, i + down])
        sum += bytes[row + before]! + bytes[row]! + bytes[row + after]!;
      out[i] = sum >= 5 ? 1 : 0;
    }
  }
  return out;
}
