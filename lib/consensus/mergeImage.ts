import type { ConsensusSettings, ImageConsensus, ImageLabels, Reliability } from "./types";

/**
 * Merges what several annotators drew on one image into one agreed set of instances, with the reason for
 * each decision. Blind to the order of annotators and of their instances; same input, same output.
 */
export function mergeImage(
  labels: ImageLabels,
  settings: Partial<ConsensusSettings> = {},
  reliability?: Reliability,
): ImageConsensus {
  throw new Error(
    `not merged yet: ${labels.annotators.length} ${settings.method} ${reliability?.iterations}`,
  );
}
