import { maskFromBytes } from "@/lib/geometry/mask";
import { simplifyRings } from "@/lib/geometry/simplify";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Point, Ring, Rings } from "@/lib/geometry/types";
import { ringsArea } from "@/lib/geometry/region";
import type { Raster } from "@/lib/vision/raster";
import { boxOfRegion, candidates, objectness, shrink, WORK_SIDE_PX, type Candidate } from "./candidates";
import { scoreExemplars, type ExemplarModel } from "./exemplar";
import { suppress } from "./suppress";

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

const IOU_MAX = 0.55;
const IOU_LOSS_MAX = 0.02;

/**
 * Proposals of one picture, best first: graph segmentation at several scales, hierarchical grouping, learned
 * ranking, suppression, outlines traced and simplified. With a model of the batch's own settled labels its
 * detections come first. Deterministic. About 0.4 s for 480 px on one core.
 */
export function propose(raster: Raster, { limit = 100, scale = 1, model }: ProposeOptions = {}): Proposal[] {
  const small = shrink(raster, WORK_SIDE_PX);
  const toOriginal = { x: raster.width / small.width / scale, y: raster.height / small.height / scale };
  const found = candidates(small);
  const boxes = found.map(({ region }) => boxOfRegion(region));
  const learned = model ? scoreExemplars(model, found, Math.max(small.width, small.height)) : null;
  const scores = found.map(({ features }, index) => learned?.[index]?.score ?? objectness(features));
  const kept = suppress(boxes, scores, IOU_MAX, limit);
  return kept.flatMap((index): Proposal[] => {
    const candidate = found[index];
    const box = boxes[index];
    if (!candidate || !box) return [];
    const rings = outlineOf(candidate).map((ring): Ring =>
      ring.map(([x, y]): Point => [x * toOriginal.x, y * toOriginal.y]),
    );
    if (rings.length === 0) return [];
    return [
      {
        box: [box[0] * toOriginal.x, box[1] * toOriginal.y, box[2] * toOriginal.x, box[3] * toOriginal.y],
        rings,
        score: scores[index] ?? 0,
        classId: learned?.[index]?.classId || null,
        source: learned ? "exemplar" : "region",
      },
    ];
  });
}

function outlineOf({ region, segments }: Candidate): Rings {
  const { width, height, label } = segments;
  const own = new Set(region.members);
  const bytes = new Uint8Array(width * height);
  for (let y = region.top; y <= region.bottom; y++) {
    for (let x = region.left; x <= region.right; x++) {
      const i = y * width + x;
      if (own.has(label[i]!)) bytes[i] = 1;
    }
  }
  const rings = traceMask(maskFromBytes(bytes, width, height), 8);
  // The largest part without its holes: what a person would begin from.
  const outer = [...rings].sort((a, b) => ringsArea([b]) - ringsArea([a])).slice(0, 1);
  return simplifyRings(outer, IOU_LOSS_MAX);
}
