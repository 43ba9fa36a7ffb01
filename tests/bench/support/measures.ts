import { assign } from "@/lib/consensus/assignment";
import { addCoverage, gridFor, type Grid } from "@/lib/consensus/field";
import { unionBox } from "@/lib/consensus/fuse";
import { regionIou, spansOf, type Spans } from "@/lib/consensus/spans";
import type { Shape } from "@/lib/geometry/types";
import type { Scene } from "./scenes";

export type Found = { classId: string; shape: Shape };

/** Counts of one method over any number of images; the measures are read off at the end. */
export class Tally {
  private readonly perClass = new Map<string, { tp: number; fp: number; fn: number; iou: number }>();
  private tp50 = 0;
  private tp75 = 0;
  private found = 0;
  private objects = 0;
  private agnostic = 0;
  private rightClass = 0;
  private iouOfAgnostic = 0;
  private boundary = 0;

  /** Matches class by class at IoU over one half, as panoptic quality does (Kirillov et al., 2019). */
  add(scene: Scene, found: readonly Found[]): { tp: number; fp: number; fn: number; iou: number } {
    const truth = scene.objects.map(({ rings }) => spansOf({ kind: "polygon", rings }));
    const shapes = found.map(({ shape }) => spansOf(shape));
    const ious = shapes.map((shape) => truth.map((object) => regionIou(shape, object)));
    const image = { tp: 0, fp: 0, fn: 0, iou: 0 };
    const classes = new Set([...scene.objects, ...found].map(({ classId }) => classId));
    for (const classId of classes) {
      const rows = found.map((_, i) => i).filter((i) => found[i]!.classId === classId);
      const columns = scene.objects.map((_, j) => j).filter((j) => scene.objects[j]!.classId === classId);
      const matches = match(rows.map((i) => columns.map((j) => ious[i]![j]!)));
      const entry = this.perClass.get(classId) ?? { tp: 0, fp: 0, fn: 0, iou: 0 };
      this.perClass.set(classId, entry);
      for (const part of [entry, image]) {
        part.tp += matches.length;
        part.iou += matches.reduce((sum, iou) => sum + iou, 0);
        part.fp += rows.length - matches.length;
        part.fn += columns.length - matches.length;
      }
      this.tp50 += matches.length;
      this.tp75 += matches.filter((iou) => iou > 0.75).length;
    }
    this.found += found.length;
    this.objects += truth.length;
    const whoever = assign(ious.map((row) => row.map((iou) => (iou > 0.5 ? 1 - iou : 2))));
    whoever.forEach((j, i) => {
      const iou = ious[i]?.[j] ?? 0;
      if (iou <= 0.5) return;
      this.agnostic++;
      this.iouOfAgnostic += iou;
      this.boundary += boundaryIou(shapes[i]!, truth[j]!, Math.hypot(scene.width, scene.height));
      if (found[i]!.classId === scene.objects[j]!.classId) this.rightClass++;
    });
    return image;
  }

  /** Panoptic quality over all instances, classes kept apart in the matching. */
  get pq(): number {
    let [iou, tp, errors] = [0, 0, 0];
    for (const entry of this.perClass.values()) {
      iou += entry.iou;
      tp += entry.tp;
      errors += entry.fp + entry.fn;
    }
    return iou / Math.max(1, tp + errors / 2);
  }
  get f50(): number {
    return (2 * this.tp50) / Math.max(1, this.found + this.objects);
  }
  get f75(): number {
    return (2 * this.tp75) / Math.max(1, this.found + this.objects);
  }
  get precision(): number {
    return this.tp50 / Math.max(1, this.found);
  }
  get recall(): number {
    return this.tp50 / Math.max(1, this.objects);
  }
  get classAccuracy(): number {
    return this.rightClass / Math.max(1, this.agnostic);
  }
  get boundaryIou(): number {
    return this.boundary / Math.max(1, this.agnostic);
  }
  get meanIou(): number {
    return this.iouOfAgnostic / Math.max(1, this.agnostic);
  }
}

/** IoUs of matched pairs; over one half a pair is unique unless shapes of one side overlap, so assign. */
function match(ious: readonly (readonly number[])[]): number[] {
  if (ious.length === 0 || ious[0]!.length === 0) return [];
  const columnOf = assign(ious.map((row) => row.map((iou) => (iou > 0.5 ? 1 - iou : 2))));
  return [...columnOf].map((j, i) => (j >= 0 ? ious[i]![j]! : 0)).filter((iou) => iou > 0.5);
}

/**
 * Boundary IoU (Cheng et al., 2021): IoU of the bands inside each outline, as wide as 2 % of the image's diagonal
 * or, on a small object, what erosion leaves. Bands by a distance transform in steps of 1 px (city block).
 */
function boundaryIou(a: Spans, b: Spans, diagonalPx: number): number {
  const grid = gridFor(unionBox([a.box, b.box]), Math.max(a.stepPx, b.stepPx), 256);
  const width = Math.max(1, Math.round((0.02 * diagonalPx) / grid.cellPx));
  const bandA = band(grid, a, width);
  const bandB = band(grid, b, width);
  let common = 0;
  let either = 0;
  for (let k = 0; k < bandA.length; k++) {
    common += bandA[k]! & bandB[k]!;
    either += bandA[k]! | bandB[k]!;
  }
  return either > 0 ? common / either : 1;
}

function band(grid: Grid, spans: Spans, width: number): Uint8Array {
  const { columns, rows } = grid;
  const cover = new Float32Array(columns * rows);
  addCoverage(grid, spans, cover);
  const depth = new Int32Array(cover.length);
  for (let k = 0; k < cover.length; k++)
    if (cover[k]! >= 0.5) depth[k] = 1 + Math.min(depth[k - 1] ?? 0, depth[k - columns] ?? 0);
  for (let k = cover.length - 1; k >= 0; k--) {
    if (depth[k]! > 0)
      depth[k] = Math.min(depth[k]!, 1 + Math.min(depth[k + 1] ?? 0, depth[k + columns] ?? 0));
  }
  return Uint8Array.from(depth, (value) => Number(value > 0 && value <= width));
}
