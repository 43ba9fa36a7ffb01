import type { Candidate, Candidates, Explanation } from "./candidates";
import type { Fused } from "./fuse";
import type { Fusion } from "./predict";
import type { PreparedImage } from "./prepare";
import type { ConsensusSettings, Reliability } from "./types";
import type { Say, VoteModel } from "./votes";

/** Everything known about one candidate once the votes are weighed. */
export type Judged = {
  readonly candidate: Candidate;
  /** What each annotator of the image says of it. */
  readonly says: readonly Say[];
  /** P(class) per class of the model, last P(nothing there). */
  readonly posterior: Float64Array;
  /** Index of the likeliest class. */
  readonly classIndex: number;
  readonly real: number;
  readonly classProbability: number;
  readonly accepted: boolean;
  readonly fused: Fused | null;
  /** Independent people who support the object. */
  readonly support: number;
  /** Independent drawings that went into the shape, and how they agree. */
  readonly fusion: Fusion;
};

export type JudgedImage = {
  readonly image: PreparedImage;
  readonly candidates: Candidates;
  readonly judged: readonly Judged[];
  readonly model: VoteModel;
  readonly reliability: Reliability;
  readonly settings: ConsensusSettings;
};

/** What each annotator says about a candidate; a class that the model does not know counts as none of its classes. */
export function saysOf(image: PreparedImage, candidate: Candidate, model: VoteModel): Say[] {
  const nothing = model.classIds.length;
  const sharers = new Int32Array(image.annotatorIds.length);
  for (const voter of image.voterOf) sharers[voter]!++;
  return image.annotatorIds.map((id, annotator) => {
    const item = candidate.saidBy[annotator]!;
    const said = item < 0 ? nothing : (model.classIndex.get(image.items[item]!.instance.classId) ?? nothing);
    return { table: model.tableOf(id), said, weight: 1 / sharers[image.voterOf[annotator]!]! };
  });
}

export function nameOf(classId: string, settings: ConsensusSettings): string {
  return settings.classNames[classId] ?? classId;
}

export function whyExplained(explanation: Explanation): string {
  switch (explanation.reason) {
    case "part-of":
      return "It is a part of an object that others drew whole.";
    case "covers-several":
      return `It covers ${explanation.of.length} objects that others drew one by one; each of them gains this vote.`;
    case "duplicate":
      return "The same person drew this object twice.";
  }
}
