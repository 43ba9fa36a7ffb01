import { maskHas, type Mask } from "@/lib/geometry/mask";
import type { Box, Point } from "@/lib/geometry/types";
import { ellipsePrior, LOOK_WIDTHS, perPixel, type OutlineWeights } from "./outline";
import { cutting, lookAt, type Cutting } from "./outlineFeatures";
import { fitRanker, rank, type Ranker } from "./ranker";
import type { Raster } from "./raster";

/** An object whose outline is known: a mask in px of the raster. */
export type OutlineExample = { raster: Raster; box: Box; mask: Mask; group: number };

type Prepared = { cut: Cutting; truth: readonly Float32Array[]; group: number };

/** The outermost pixels of a mask: top, right, bottom, left, each the middle of its run. */
export function extremePoints(mask: Mask): Point[] {
  let top: Point[] = [];
  let bottom: Point[] = [];
  let left: Point[] = [];
  let right: Point[] = [];
  for (let y = mask.y; y < mask.y + mask.height; y++) {
    for (let x = mask.x; x < mask.x + mask.width; x++) {
      if (!maskHas(mask, x, y)) continue;
      const point: Point = [x + 0.5, y + 0.5];
      if (top.length === 0 || y + 0.5 < top[0]![1]) top = [point];
      else if (y + 0.5 === top[0]![1]) top.push(point);
      if (bottom.length === 0 || y + 0.5 > bottom[0]![1]) bottom = [point];
      else if (y + 0.5 === bottom[0]![1]) bottom.push(point);
      if (left.length === 0 || x + 0.5 < left[0]![0]) left = [point];
      else if (x + 0.5 === left[0]![0]) left.push(point);
      if (right.length === 0 || x + 0.5 > right[0]![0]) right = [point];
      else if (x + 0.5 === right[0]![0]) right.push(point);
    }
  }
  const middle = (points: Point[]): Point[] => (points.length > 0 ? [points[points.length >> 1]!] : []);
  return [top, right, bottom, left].flatMap(middle);
}

function prepare(examples: readonly OutlineExample[], withExtremes: boolean): Prepared[] {
  return examples.flatMap(({ raster, box, mask, group }) => {
    const cut = cutting(raster, box, withExtremes ? extremePoints(mask) : []);
    if (!cut) return [];
    const { width, height, left, top, scaleX, scaleY } = cut;
    const truth = cut.partitions.map(({ label, count, size }) => {
      const share = new Float32Array(count);
      for (let y = 0, i = 0; y < height; y++) {
        for (let x = 0; x < width; x++, i++) {
          if (maskHas(mask, Math.floor((x + 0.5) / scaleX + left), Math.floor((y + 0.5) / scaleY + top)))
            share[label[i]!]! += 1 / size[label[i]!]!;
        }
      }
      return share;
    });
    return [{ cut, truth, group }];
  });
}

/**
 * Learns the two looks of `outlineInBox`. Opinions that teach the second look come from first looks that did not see
 * the group (the photograph), or it would learn to trust them too much. Deterministic.
 */
export function learnOutline(examples: readonly OutlineExample[], seed = 1): OutlineWeights {
  const learn = (withExtremes: boolean): [Ranker, Ranker] => {
    const prepared = prepare(examples, withExtremes);
    const looks = prepared.map(({ cut }) => {
      const prior = ellipsePrior(cut);
      return cut.partitions.map((part) => lookAt(cut, part, prior, undefined));
    });
    const fit = (
      list: readonly number[],
      rows: (n: number) => readonly Float32Array[],
      width: number,
      offset: number,
    ) =>
      fitLook(
        list.map((n) => ({ rows: rows(n), ...prepared[n]! })),
        width,
        seed + offset,
      );
    const everyone = prepared.map((_, n) => n);
    const first = fit(everyone, (n) => looks[n]!, LOOK_WIDTHS[0], 0);
    const heldOut: Float32Array[][] = [];
    for (let fold = 0; fold < 3; fold++) {
      const model = fit(
        everyone.filter((n) => prepared[n]!.group % 3 !== fold),
        (n) => looks[n]!,
        LOOK_WIDTHS[0],
        fold + 1,
      );
      for (const n of everyone) {
        if (prepared[n]!.group % 3 !== fold) continue;
        heldOut[n] = looks[n]!.map((rows) =>
          Float32Array.from(rank(model, rows), (score) => 1 / (1 + Math.exp(-score))),
        );
      }
    }
    const again = prepared.map(({ cut }, n) => {
      const middle = perPixel(cut, heldOut[n]!);
      return cut.partitions.map((part, index) => lookAt(cut, part, middle, heldOut[n]![index]!));
    });
    const second = fit(everyone, (n) => again[n]!, LOOK_WIDTHS[1], 9);
    return [first, second];
  };
  return { box: learn(false), extremes: learn(true) };
}

/** More superpixels teach no more, and take longer. */
const ROWS_MAX = 40_000;

function fitLook(
  list: readonly (Prepared & { rows: readonly Float32Array[] })[],
  width: number,
  seed: number,
): Ranker {
  const features: number[] = [];
  const target: number[] = [];
  const weight: number[] = [];
  const total = list.reduce(
    (sum, { cut }) => sum + cut.partitions.reduce((own, part) => own + part.count, 0),
    0,
  );
  const step = Math.max(1, Math.ceil(total / ROWS_MAX));
  let turn = 0;
  for (const { cut, truth, rows } of list) {
    const boxArea = cut.box[2] * cut.box[3];
    cut.partitions.forEach((part, index) => {
      for (let s = 0; s < part.count; s++) {
        if (part.inBox[s] === 0 || turn++ % step !== 0) continue;
        for (let f = 0; f < width; f++) features.push(rows[index]![s * width + f]!);
        target.push(truth[index]![s]!);
        // Every object counts the same, its superpixels by the area they decide.
        weight.push(part.inBox[s]! / boxArea);
      }
    });
  }
  return fitRanker(
    {
      features: Float32Array.from(features),
      target: Float32Array.from(target),
      weight: Float32Array.from(weight),
    },
    width,
    { hidden: 12, networks: 2, epochs: 5, rate: 0.004, decay: 0.005, seed },
  );
}
