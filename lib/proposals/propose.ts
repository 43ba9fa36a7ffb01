import { ringOfBox } from "@/lib/geometry/box";
import { maskFromBytes } from "@/lib/geometry/mask";
import { ringsArea } from "@/lib/geometry/region";
import { simplifyRings } from "@/lib/geometry/simplify";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import { outlineInBox } from "@/lib/vision/outline";
import { cutRaster, shrinkRaster, type Raster } from "@/lib/vision/raster";
import { candidates, WORK_SIDE_PX, type CandidateSet } from "./candidates";
import { detectExemplars, type ExemplarModel } from "./exemplar";
import { everydayProbability, type EverydayDetector } from "./everyday";
import type { EverydayLabel } from "./everydayLabels";
import { leavesOf } from "./hierarchy";
import { keepProbability, rankCandidates, type ObjectnessWeights } from "./objectness";
import { suppressInTwo } from "./suppress";
import { tilesOf, type Tile } from "./tiles";
import { OBJECTNESS } from "./weights/objectness";

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
  everyday?: Everyday;
  /** Proposals from elsewhere, px of the raster, with calibrated scores: they are mixed in. */
  also?: readonly Proposal[];
  /** False where only boxes are wanted: then outlines are left out. */
  isTraced?: boolean;
  /** What ranks the regions; the shipped weights where absent. */
  weights?: ObjectnessWeights;
};

/** The detector of everyday things, and the class that each of its labels stands for. */
export type Everyday = {
  detector: EverydayDetector;
  classOf: ReadonlyMap<EverydayLabel, string | null>;
  /** Whether everything that is wanted is among the labels: then little is left for the regions to find. */
  isAll: boolean;
};

const IOU_LOSS_MAX = 0.02;
/** Two finds of one object by different looks (tiles, the model) overlap by more than this. */
const SAME_IOU = 0.55;
/** The first so many show different objects; what follows may be another try at the same ones. */
const STRICT_COUNT = 100;
const LENIENT_IOU = 0.7;
/** Share of their probability that regions keep where the detector knows all that is wanted. */
const REST_SHARE = 0.25;
/** A less likely hit of the detector is hardly ever taken: its outline is not worth its time. */
const OUTLINED_FROM = 0.08;
/** One scale of the segmentation is enough for the small things that tiles are for, at a third of the time. */
const TILE_SCALES = [50] as const;
/** Kept of one tile before all are merged. */
const TILE_LIMIT = 150;
/** A region that fills less of its tile's cut border is whole; a larger one is better seen in the whole picture. */
const TILE_SHARE_MAX = 0.25;

/**
 * Proposals of one picture, in the order in which they are worth a look: graph segmentation at three scales, two ways of hierarchical grouping, learned
 * ranking, suppression, outlines traced and simplified. Pictures much larger than the working size are also
 * looked at in overlapping tiles. With a model of the batch's own settled labels its detections come first,
 * with their class; with the detector of everyday things its hits do, for the classes that it knows. Scores are calibrated probabilities. A blank picture has no proposals. Deterministic.
 */
export function propose(
  raster: Raster,
  {
    limit = 100,
    scale = 1,
    model,
    everyday,
    also = [],
    isTraced = true,
    weights = OBJECTNESS,
  }: ProposeOptions = {},
): Proposal[] {
  if (raster.width < 4 || raster.height < 4) return [];
  const found: Found[] = [...also];
  if (model) found.push(...detectExemplars(raster, model, limit));
  if (everyday) found.push(...proposeEveryday(raster, everyday));
  const share = everyday?.isAll ? REST_SHARE : 1;
  for (const tile of tilesOf(raster.width, raster.height))
    found.push(...proposeInTile(raster, tile, limit, weights, share));
  return distinct(found, limit).map((proposal) =>
    scaled(isTraced ? outlined(raster, proposal) : proposal, 1 / scale),
  );
}

/** Hits of the detector as proposals, without outlines yet. */
function proposeEveryday(raster: Raster, { detector, classOf }: Everyday): Proposal[] {
  return detector.find(raster, new Set(classOf.keys())).map(({ box, label, score }) => ({
    box,
    rings: [],
    score: everydayProbability(score),
    classId: classOf.get(label) ?? null,
    source: "detector",
  }));
}

/** A proposal whose outline is traced only if it is among those that are given out: tracing takes longer than finding. */
type Found = Proposal & { trace?: () => Rings };

function outlined(raster: Raster, { trace, ...proposal }: Found): Proposal {
  if (proposal.rings.length > 0) return proposal;
  const rings = trace
    ? trace()
    : proposal.score < OUTLINED_FROM
      ? []
      : outlineInBox(raster, proposal.box).rings;
  return { ...proposal, rings: rings.length > 0 ? rings : [ringOfBox(proposal.box)] };
}

function proposeInTile(
  raster: Raster,
  tile: Tile,
  limit: number,
  weights: ObjectnessWeights,
  share: number,
): Found[] {
  const isWhole = tile.workSide === WORK_SIDE_PX;
  const part =
    tile.width === raster.width && tile.height === raster.height
      ? raster
      : cutRaster(raster, tile.left, tile.top, tile.width, tile.height);
  const small = shrinkRaster(part, tile.workSide);
  const toRaster = { x: part.width / small.width, y: part.height / small.height };
  const set = candidates(
    small,
    {
      left: tile.left / toRaster.x,
      top: tile.top / toRaster.y,
      width: raster.width / toRaster.x,
      height: raster.height / toRaster.y,
    },
    isWhole ? undefined : TILE_SCALES,
  );
  const { order, scores, boxes } = rankCandidates(
    set,
    isWhole ? limit : Math.min(limit, TILE_LIMIT),
    weights.ranker,
  );
  return order.flatMap((n): Found[] => {
    const box = boxes[n];
    if (!box || (!isWhole && !isWithin(box, small, tile, raster))) return [];
    const place = ([x, y]: Point): Point => [x * toRaster.x + tile.left, y * toRaster.y + tile.top];
    const [left, top] = place([box[0], box[1]]);
    return [
      {
        box: [left, top, box[2] * toRaster.x, box[3] * toRaster.y],
        rings: [],
        trace: () => outlineOf(set, n).map((ring): Ring => ring.map(place)),
        score: share * keepProbability(scores[n] ?? 0, weights),
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

/**
 * Of two that overlap by more than `SAME_IOU` the better stays (ties: the earlier), best first. A list of over a hundred asks for
 * every chance: those passed over follow, unless nearly the same, and are stated no likelier than what they follow.
 */
function distinct(found: readonly Found[], limit: number): Found[] {
  const order = suppressInTwo(
    found.map(({ box }) => box),
    found.map(({ score }) => score),
    { strictMax: SAME_IOU, lenientMax: LENIENT_IOU, count: STRICT_COUNT, limit },
  );
  let least = 1;
  return order.map((index) => {
    const proposal = found[index]!;
    least = Math.min(least, proposal.score);
    return { ...proposal, score: least };
  });
}

function scaled({ trace: _, ...proposal }: Found, factor: number): Proposal {
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
