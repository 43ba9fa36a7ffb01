import { assign } from "@/lib/consensus/assignment";
import type { AnnotatorScore, InstanceScore, LabelledInstance } from "@/lib/consensus/types";
import { shapeIou } from "@/lib/geometry/iou";

/** Overlap from which a shape counts as the object (common practice, as in PASCAL VOC). */
const FOUND_IOU = 0.5;

/**
 * An annotator's instances against labels that an admin decided on: best one-to-one pairs by IoU, class
 * right, IoU 0.5 or more. O(n m) overlaps and an assignment.
 */
export function scoreAgainst(
  annotatorId: string,
  instances: readonly LabelledInstance[],
  decided: readonly LabelledInstance[],
): AnnotatorScore {
  const ious = instances.map((mine) => decided.map((theirs) => shapeIou(mine.shape, theirs.shape)));
  const pairs =
    decided.length > 0 && instances.length > 0
      ? assign(
          ious.map((row, i) =>
            row.map((iou, j) => (instances[i]?.classId === decided[j]?.classId ? -iou : -iou / 10)),
          ),
        )
      : new Int32Array(instances.length).fill(-1);
  const scores = instances.map((instance, index): InstanceScore => {
    const partner = pairs[index] ?? -1;
    const iou = partner < 0 ? 0 : (ious[index]?.[partner] ?? 0);
    if (partner < 0 || iou <= 0.1) {
      return {
        instanceId: instance.id,
        outcome: "unsupported",
        iou: null,
        why: "The decision has no object here.",
      };
    }
    const rounded = `overlap ${iou.toFixed(2)}`;
    if (decided[partner]?.classId !== instance.classId) {
      return {
        instanceId: instance.id,
        outcome: "wrong-class",
        iou,
        why: `The decision gives this object another class (${rounded}).`,
      };
    }
    if (iou < FOUND_IOU)
      return {
        instanceId: instance.id,
        outcome: "loose",
        iou,
        why: `Too far from the decided outline (${rounded}).`,
      };
    return { instanceId: instance.id, outcome: "agreed", iou, why: `Fits the decided outline (${rounded}).` };
  });
  const agreed = scores.filter((score) => score.outcome === "agreed");
  const sum = agreed.reduce((total, score) => total + (score.iou ?? 0), 0);
  const found = agreed.length;
  const missed = decided.length - found;
  const spurious = instances.length - found;
  // Panoptic quality (Kirillov et al., 2019); nothing drawn where nothing is counts as perfect.
  const denominator = found + (missed + spurious) / 2;
  return {
    annotatorId,
    found,
    missed,
    spurious,
    meanIou: found > 0 ? sum / found : null,
    quality: denominator === 0 ? 1 : sum / denominator,
    instances: scores,
  };
}
