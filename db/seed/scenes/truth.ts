import { writeCoco } from "@/lib/formats/coco";
import { toSource, type DatasetAnnotation } from "@/lib/formats/dataset";
import { maskArea, maskBounds, maskFromBytes, rasteriseRings, trimMask } from "@/lib/geometry/mask";
import { rleFromMask } from "@/lib/geometry/rle";
import { traceMask } from "@/lib/geometry/trace";
import type { Box, Rings } from "@/lib/geometry/types";

export type SceneInstance = {
  className: string;
  /** Smallest box of whole px around what is seen. */
  box: Box;
  /** Edges of the pixels that are seen, holes included: exact, so rasterising them gives the pixels back. */
  rings: Rings;
  /** Pixels seen, out of those it would cover in the picture if nothing lay over it; 0..1. */
  visibleFraction: number;
  occluded: boolean;
};

/** Objects of which less is seen, in px or as a share, are no truth: nobody could be asked to find them. */
const VISIBLE_MIN_PX = 90;
const VISIBLE_MIN_SHARE = 0.12;
/** Below this share an object counts as partly hidden. */
const WHOLE_SHARE = 0.9;

type Owned = {
  owner: Int16Array;
  fullPx: readonly number[];
  width: number;
  height: number;
  classNames: readonly string[];
};

/** The objects of a picture from the number of the object seen in each pixel, in order of number. O(pixels of their boxes). */
export function instancesOf({ owner, fullPx, width, height, classNames }: Owned): SceneInstance[] {
  const bounds = classNames.map(() => ({ left: width, top: height, right: -1, bottom: -1, px: 0 }));
  for (let i = 0; i < owner.length; i++) {
    const of = owner[i]! > 0 ? bounds[owner[i]!] : undefined;
    if (!of) continue;
    const x = i % width;
    const y = (i - x) / width;
    of.left = Math.min(of.left, x);
    of.right = Math.max(of.right, x);
    of.top = Math.min(of.top, y);
    of.bottom = Math.max(of.bottom, y);
    of.px += 1;
  }
  return classNames.flatMap((className, number): SceneInstance[] => {
    const { left, top, right, bottom, px } = bounds[number]!;
    const visibleFraction = px / Math.max(px, fullPx[number] ?? 0, 1);
    if (number === 0 || px < VISIBLE_MIN_PX || visibleFraction < VISIBLE_MIN_SHARE) return [];
    const bytes = new Uint8Array(owner.length);
    for (let y = top; y <= bottom; y++) {
      for (let i = y * width + left; i <= y * width + right; i++) if (owner[i] === number) bytes[i] = 1;
    }
    const mask = trimMask(maskFromBytes(bytes, width, height));
    return [
      {
        className,
        box: maskBounds(mask),
        rings: traceMask(mask),
        visibleFraction,
        occluded: visibleFraction < WHOLE_SHARE,
      },
    ];
  });
}

export type TruthPicture = {
  fileName: string;
  scene: { width: number; height: number; instances: readonly SceneInstance[] };
};

/** The truth of some pictures as a COCO file's text: exact masks as run lengths, boxes, areas, and what is hidden in part. */
export function sceneTruth(pictures: readonly TruthPicture[]): string {
  const names = [
    ...new Set(pictures.flatMap(({ scene }) => scene.instances.map(({ className }) => className))),
  ].sort();
  const classes = names.map((name, index) => ({ id: index + 1, name }));
  const images = pictures.map(({ fileName, scene: { width, height } }, index) => ({
    id: index + 1,
    fileName,
    width,
    height,
  }));
  const annotations: DatasetAnnotation[] = [];
  for (const [index, { scene }] of pictures.entries()) {
    for (const { className, box, rings, occluded } of scene.instances) {
      const mask = rasteriseRings(rings, scene.width, scene.height);
      annotations.push({
        id: annotations.length + 1,
        imageId: index + 1,
        classId: names.indexOf(className) + 1,
        shape: { kind: "mask", rle: rleFromMask(mask, scene.width, scene.height) },
        crowd: false,
        box,
        areaPx2: maskArea(mask),
        occluded,
      });
    }
  }
  return [
    ...writeCoco(toSource({ images, classes, annotations }), {
      description: "Rendered scenes; outlines are exact",
    }),
  ].join("");
}
