import { boxArea, boxOfRings, clipBoxToImage } from "./box";
import { withoutRepeats, withoutSpikes } from "./clean";
import { clipRingsToImage, normaliseRings } from "./clip";
import { prepareRings, regionIntersectionArea, ringsArea } from "./region";
import { signedRingArea } from "./ring";
import type { Box, Point, Rings, Shape } from "./types";

/** What was changed to make a shape valid, one entry a kind. */
export type Repair = "clipped" | "repeated-points" | "spikes" | "self-crossing" | "empty-rings";

export type Validated =
  | { readonly ok: true; readonly shape: Shape; readonly repairs: readonly Repair[] }
  | { readonly ok: false; readonly reason: string };

export type ValidationLimits = {
  /** Size of the image in px. */
  readonly width: number;
  readonly height: number;
  /** Vertices over all rings; more are refused. */
  readonly verticesMax?: number;
  /** Smallest area in px² that counts as an object. */
  readonly areaPx2Min?: number;
};

const VERTICES_MAX = 20_000;
/** No image is larger, so a vertex so far from its middle is a mistake and not an outline that leaves the image. */
const FAR_PX = 1e7;
/** Areas by the two fill rules differ by rounding alone below this share. */
const AREA_TOLERANCE = 1e-9;

/**
 * Checks a shape against its image and repairs what has one obvious repair: parts outside are cut off, repeated points
 * and spikes (there and back on the same line) go, rings that cross become rings that do not, with the same
 * even-odd region, and rings without area go. Refused, with a reason in one line that is safe to show: numbers that
 * are not finite, fewer than three vertices, too many of them, nothing inside the image, no area.
 */
export function validateShape(shape: Shape, limits: ValidationLimits): Validated {
  return shape.kind === "box" ? validateBox(shape.box, limits) : validateRings(shape.rings, limits);
}

function refuse(reason: string): Validated {
  return { ok: false, reason };
}

function validateBox(box: Box, { width, height, areaPx2Min = 0 }: ValidationLimits): Validated {
  if (box.length !== 4 || !box.every(Number.isFinite)) return refuse("a box needs four finite numbers");
  if (!(box[2] > 0 && box[3] > 0)) return refuse("the box has no area");
  const clipped = clipBoxToImage(box, width, height);
  if (clipped === undefined) return refuse("the box lies outside the image");
  if (boxArea(clipped) < areaPx2Min) return refuse(`the box covers less than ${areaPx2Min} px²`);
  const isInside = box[0] >= 0 && box[1] >= 0 && box[0] + box[2] <= width && box[1] + box[3] <= height;
  if (isInside) return { ok: true, shape: { kind: "box", box }, repairs: [] };
  return { ok: true, shape: { kind: "box", box: clipped }, repairs: ["clipped"] };
}

function validateRings(input: Rings, limits: ValidationLimits): Validated {
  const { width, height, verticesMax = VERTICES_MAX, areaPx2Min = 0 } = limits;
  const vertexCount = input.reduce((sum, ring) => sum + ring.length, 0);
  if (vertexCount > verticesMax)
    return refuse(`the outline has ${vertexCount} vertices, at most ${verticesMax} are read`);
  if (!input.every((ring) => ring.every((point) => point.length === 2 && point.every(Number.isFinite)))) {
    return refuse("the outline has a vertex that is not two finite numbers");
  }
  const isFar = ([x, y]: Point) => Math.abs(x - width / 2) > FAR_PX || Math.abs(y - height / 2) > FAR_PX;
  if (input.some((ring) => ring.some(isFar))) return refuse("the outline has a vertex far outside the image");
  if (input.every((ring) => ring.length < 3)) return refuse("the outline has fewer than three vertices");

  const repairs: Repair[] = [];
  const keep = (before: Rings, after: Rings, repair: Repair): Rings => {
    if (after.length !== before.length || after.some((ring, i) => ring.length !== before[i]?.length))
      repairs.push(repair);
    return after;
  };
  let rings = keep(input, input.map(withoutRepeats), "repeated-points");
  rings = keep(rings, rings.map(withoutSpikes), "spikes");
  rings = keep(
    rings,
    rings.filter((ring) => ring.length >= 3 && ringsArea([ring]) > 0),
    "empty-rings",
  );
  if (rings.length === 0) return refuse("the outline encloses no area");

  const [x, y, boxWidth, boxHeight] = boxOfRings(rings);
  if (x < 0 || y < 0 || x + boxWidth > width || y + boxHeight > height) {
    rings = clipRingsToImage(rings, width, height);
    repairs.push("clipped");
    if (rings.length === 0) return refuse("the outline lies outside the image");
  }
  if (crosses(rings)) {
    rings = normaliseRings(rings);
    repairs.push("self-crossing");
  }
  const areaPx2 = ringsArea(rings);
  if (!(areaPx2 > 0)) return refuse("the outline encloses no area");
  if (areaPx2 < areaPx2Min) return refuse(`the outline covers less than ${areaPx2Min} px²`);
  return { ok: true, shape: { kind: "polygon", rings }, repairs };
}

/**
 * Whether rings cross themselves or each other by more than rounding. A ring that does not has an even-odd area that
 * equals its shoelace area; two rings that do not are apart, or one lies inside the other.
 */
export function crosses(rings: Rings): boolean {
  const regions = rings.map((ring) => prepareRings([ring]));
  const isEqual = (a: number, b: number, scale: number) => Math.abs(a - b) <= AREA_TOLERANCE * scale;
  return regions.some((region, i) => {
    const shoelace = Math.abs(signedRingArea(rings[i]!));
    if (!isEqual(region.areaPx2, shoelace, region.box[2] * region.box[3])) return true;
    return regions.slice(0, i).some((other) => {
      const common = regionIntersectionArea(region, other);
      const smaller = Math.min(region.areaPx2, other.areaPx2);
      return !isEqual(common, 0, smaller) && !isEqual(common, smaller, smaller);
    });
  });
}
