import type { Box, Shape } from "@/lib/geometry/types";

/** One shape drawn or taken by one annotator. Ids are unique within the annotator's labels of the image. */
export type LabelledInstance = {
  id: string;
  classId: string;
  shape: Shape;
  /** A region that stands for many objects at once; it is matched only with other crowd regions. */
  crowd?: boolean;
  occluded?: boolean;
  truncated?: boolean;
  origin?: "drawn" | "taken" | "adjusted";
  proposalId?: string | null;
};

/** Everything one annotator handed in for one image. An empty list says: looked, and found nothing. */
export type AnnotatorLabels = { annotatorId: string; instances: readonly LabelledInstance[] };

export type ImageLabels = { width: number; height: number; annotators: readonly AnnotatorLabels[] };

/** How instances of several annotators are gathered into one object; see the docstrings in cluster.ts. */
export const CONSENSUS_METHODS = [
  "average",
  "suppression",
  "mean-shift",
  "single",
  "hdbscan",
  "facility",
] as const;
export type ConsensusMethod = (typeof CONSENSUS_METHODS)[number];

/** How the members of one object become one outline. */
export type FusionMethod = "weighted" | "majority" | "staple" | "medoid";

/** How existence and class are decided. */
export type VoteMethod = "dawid-skene" | "weighted" | "majority";

export type ConsensusSettings = {
  method: ConsensusMethod;
  fusion: FusionMethod;
  votes: VoteMethod;
  /** Least similarity (IoU, lowered where the classes differ) at which two groups are still merged; 0..1. */
  iouCut: number;
  /** The agreement at which an image is settled; 0..1. */
  agreementTarget: number;
  /** Fewest annotators before an image may be settled. */
  kMin: number;
  /** Most annotators that are asked for one image; below the target it is then split. */
  kMax: number;
  /** Probability of being real from which an object is agreed; 0..1. */
  existenceCut: number;
  /** An instance that overlaps its agreed outline by less than this IoU is called loose; 0..1. */
  looseIou: number;
  /** Classes whose agreed instances are boxes even where some annotators drew outlines. */
  boxClasses: readonly string[];
  /** Most IoU that simplifying an agreed outline may cost; 0..1. */
  outlineIouLossMax: number;
  /** Names of classes for the words that people read; an id without a name stands for itself. */
  classNames: Readonly<Record<string, string>>;
  /** Explain one-to-many (merged, split) instances and let them support what they cover. */
  explain: boolean;
};

export type AgreedMember = { annotatorId: string; instanceId: string; iou: number };

/** One object of the consensus. */
export type AgreedInstance = {
  classId: string;
  shape: Shape;
  box: Box;
  /** Probability that the object is real, of any class; 0..1. */
  score: number;
  /** Probability of the class, given that the object is real; 0..1. */
  classProbability: number;
  /** Expected IoU of the shape with the truth; 0..1. */
  predictedIou: number;
  /** Annotators who support it; people who copy one another count as one. */
  support: number;
  /** Annotators who could have. */
  seen: number;
  /** How far the members' shapes differ: 1 minus their mean pairwise IoU; 0..1, 0 for a single member. */
  spread: number;
  crowd: boolean;
  members: AgreedMember[];
  why: string;
};

export type LeftOutReason =
  "unsupported" | "outvoted-class" | "part-of" | "covers-several" | "duplicate" | "low-overlap";

export type LeftOutInstance = { annotatorId: string; instanceId: string; reason: LeftOutReason; why: string };

export type InstanceOutcome = "agreed" | "wrong-class" | "loose" | "unsupported" | "duplicate";

export type InstanceScore = { instanceId: string; outcome: InstanceOutcome; iou: number | null; why: string };

/** An annotator against the consensus of the others: the own vote and outline never count. */
export type AnnotatorScore = {
  annotatorId: string;
  found: number;
  missed: number;
  spurious: number;
  /** Mean IoU of what was found; null when nothing was. */
  meanIou: number | null;
  /** Expected panoptic quality against the others; 0..1. */
  quality: number;
  instances: InstanceScore[];
};

/** An estimate with the ends of its 95 % interval, all 0..1. */
export type Estimate = { value: number; low: number; high: number };

export type Verdict = "settled" | "short" | "split";

export type ImageConsensus = {
  agreed: AgreedInstance[];
  leftOut: LeftOutInstance[];
  scores: AnnotatorScore[];
  /** Share of the merged labels that an independent group of the same size would confirm; 0..1. */
  agreement: number;
  /** Expected panoptic quality against the truth. */
  predictedQuality: Estimate;
  verdict: Verdict;
  reason: string;
};

/** What a batch tells about one annotator. Plain data: it survives JSON. */
export type AnnotatorReliability = {
  annotatorId: string;
  images: number;
  instances: number;
  /** Of the real objects in the images seen, the share that was found. */
  detection: Estimate;
  /** Of the instances drawn, the share that stood for no real object. */
  falseAlarm: Estimate;
  /** P(drawn class or nothing | true class or nothing): rows and columns are the classes, then "nothing". */
  confusion: number[][];
  /** False objects an image, in expectation. */
  inventions: number;
  /** Weight of the outline in a fusion, relative to a typical annotator (1). */
  outlineWeight: number;
  /** Mean 1 - IoU with the outline of the others. */
  outlineLoss: number;
  /** Expected quality of a submission; 0..1. */
  quality: number;
  /** Gold images that went into this. */
  goldImages: number;
  /** Whom the annotator copies: another annotator, the untouched proposals, or nobody. */
  copyOf: string | null;
};

/** Annotators whose labels repeat each other, or the untouched proposals; each group has one vote. */
export type CopyGroup = {
  annotatorIds: string[];
  source: "annotator" | "proposals";
  /** Share of the drawings compared that are the same. */
  share: number;
};

/** What the whole batch tells about its annotators; made by estimateReliability, used by mergeImage. */
export type Reliability = {
  classIds: string[];
  /** Real objects of each class an image, in expectation. */
  objectsPerImage: number[];
  /** Chance that someone else draws a false object where one person has drawn one; 0..1. */
  coincidence: number;
  annotators: Record<string, AnnotatorReliability>;
  /** What is assumed of an annotator about whom nothing is known. */
  typical: AnnotatorReliability;
  copies: CopyGroup[];
  /** Added to the logit of a predicted IoU; fixed by gold images, 0 without. */
  iouShift: number;
  iterations: number;
  converged: boolean;
};

export const DEFAULT_SETTINGS: ConsensusSettings = {
  method: "average",
  fusion: "weighted",
  votes: "dawid-skene",
  iouCut: 0.25,
  agreementTarget: 0.8,
  kMin: 2,
  kMax: 5,
  existenceCut: 0.5,
  looseIou: 0.6,
  boxClasses: [],
  outlineIouLossMax: 0.005,
  classNames: {},
  explain: true,
};
