import type { ClassRow } from "@/db/queries/batches";
import type { EverydayLabel } from "@/lib/proposals/everydayLabels";

/** Labels of the detector with the class that each stands for; of two classes with one label the first. */
export function knownLabels(key: readonly ClassRow[]): [EverydayLabel, string][] {
  const labels = new Map<EverydayLabel, string>();
  for (const { id, detectorLabel } of key)
    if (detectorLabel !== null && !labels.has(detectorLabel)) labels.set(detectorLabel, id);
  return [...labels];
}

type Measured = { recallWithDetector: number | null; recallWithoutDetector: number | null };

/** Whether the detector is used: until it is measured on settled pictures, and then where it helps. */
export function isDetectorOn(training: Measured | undefined): boolean {
  if (!training || training.recallWithDetector === null || training.recallWithoutDetector === null)
    return true;
  return training.recallWithDetector > training.recallWithoutDetector;
}
