import { candidatesOf, type Candidate, type Candidates } from "./candidates";
import { cluster } from "./cluster";
import { fuse } from "./fuse";
import { nameOf, saysOf, whyExplained, type Judged, type JudgedImage } from "./judged";
import { combinedLoss, expectedQuality, predictIou, stepUp, type Expected } from "./predict";
import { prepareImage, type Item, type PreparedImage } from "./prepare";
import { scoreAnnotators } from "./score";
import { boxIou } from "./spans";
import {
  DEFAULT_SETTINGS,
  type AgreedInstance,
  type ConsensusSettings,
  type ImageConsensus,
  type ImageLabels,
  type LeftOutInstance,
  type Reliability,
  type Verdict,
} from "./types";
import { posteriorOf, typicalReliability, voteModel, type Say, type VoteModel } from "./votes";
import { people, peopleOf, percent } from "./words";

/**
 * Merges what several annotators drew on one image into one agreed set of instances, with the reason for
 * each decision in words. Blind to the order of annotators and of their instances; same input, same output.
 * Without `reliability` everyone is taken for a typical annotator. Instances come largest support first.
 * Cost: a few milliseconds for five people and eight objects; linear in instances where they do not crowd.
 */
export function mergeImage(
  labels: ImageLabels,
  settings: Partial<ConsensusSettings> = {},
  reliability?: Reliability,
): ImageConsensus {
  return reportOn(judgeImage(labels, { ...DEFAULT_SETTINGS, ...settings }, reliability));
}

/** The part of the merge up to the shapes: what the object scores, reports and heat maps are made from. */
export function judgeImage(
  labels: ImageLabels,
  settings: ConsensusSettings,
  reliability?: Reliability,
): JudgedImage {
  const image = prepareImage(labels, reliability);
  const candidates = groupImage(image, settings, reliability);
  return judgeCandidates(image, candidates, settings, reliability);
}

export function groupImage(
  image: PreparedImage,
  settings: ConsensusSettings,
  reliability?: Reliability,
): Candidates {
  const clusters = cluster(image, settings.method, settings.iouCut);
  return candidatesOf(image, clusters, { explain: settings.explain, iouCut: settings.iouCut, reliability });
}

function judgeCandidates(
  image: PreparedImage,
  candidates: Candidates,
  settings: ConsensusSettings,
  given: Reliability | undefined,
): JudgedImage {
  const reliability = given ?? typicalReliability(classesOf(image));
  const model = voteModel(reliability);
  const judged = candidates.list.map((candidate) => judge(image, candidate, settings, reliability, model));
  return { image, candidates, judged, model, reliability, settings };
}

function classesOf(image: PreparedImage): string[] {
  return [...new Set(image.items.map(({ instance }) => instance.classId))].sort();
}

function judge(
  image: PreparedImage,
  candidate: Candidate,
  settings: ConsensusSettings,
  reliability: Reliability,
  model: VoteModel,
): Judged {
  const says = saysOf(image, candidate, model);
  const posterior =
    settings.votes === "dawid-skene"
      ? posteriorOf(model, says)
      : countVotes(image, candidate, settings, reliability, model, says);
  const nothing = model.classIds.length;
  let classIndex = 0;
  for (let t = 1; t < nothing; t++) if (posterior[t]! > posterior[classIndex]!) classIndex = t;
  const real = 1 - posterior[nothing]!;
  const accepted = nothing > 0 && real >= settings.existenceCut;
  const classId = model.classIds[classIndex] ?? "";
  const supporters = new Set<number>();
  candidate.saidBy.forEach((item, annotator) => {
    if (item >= 0 && image.items[item]!.instance.classId === classId)
      supporters.add(image.voterOf[annotator]!);
  });
  const drawers = new Set(candidate.members.map((item) => image.items[item]!.voter));
  const fused = accepted ? fuse(image, candidate, classId, settings, reliability) : null;
  return {
    candidate,
    says,
    posterior,
    classIndex,
    real,
    classProbability: real > 0 ? posterior[classIndex]! / real : 0,
    accepted,
    fused,
    support: supporters.size,
    fusion: {
      pairIou: pairIouOf(image, candidate, reliability),
      count: drawers.size,
      peopleLoss: combinedLoss(drawerLosses(image, candidate, reliability)),
      sizePx: Math.sqrt(image.items[candidate.medoid]!.spans.areaPx2),
      raggedness: raggednessOf(image.items[candidate.medoid]!),
    },
  };
}

/** Usual loss of each independent person who drew the object; of people who copy each other, the best. */
function drawerLosses(image: PreparedImage, candidate: Candidate, reliability: Reliability): number[] {
  const best = new Map<number, number>();
  for (const item of candidate.members) {
    const { voter, annotator } = image.items[item]!;
    const known = reliability.annotators[image.annotatorIds[annotator]!] ?? reliability.typical;
    best.set(voter, Math.min(best.get(voter) ?? 1, known.outlineLoss));
  }
  return [...best.values()];
}

/** Outline length over that of a circle of the same area. */
function raggednessOf({ instance, spans }: Item): number {
  if (spans.areaPx2 <= 0) return 1;
  let length = 0;
  if (instance.shape.kind === "box") length = 2 * (spans.box[2] + spans.box[3]);
  else {
    for (const ring of instance.shape.rings) {
      for (let i = 0, j = ring.length - 1; i < ring.length; j = i++) {
        length += Math.hypot(ring[i]![0] - ring[j]![0], ring[i]![1] - ring[j]![1]);
      }
    }
  }
  return length / (2 * Math.sqrt(Math.PI * spans.areaPx2));
}

/** For a lone drawing: what a like person's second drawing would be expected to give. */
function pairIouOf(image: PreparedImage, candidate: Candidate, reliability: Reliability): number {
  if (!Number.isNaN(candidate.meanPairIou)) return candidate.meanPairIou;
  const id = image.annotatorIds[image.items[candidate.medoid]!.annotator]!;
  const loss = (reliability.annotators[id] ?? reliability.typical).outlineLoss;
  return Math.max(0.05, 1 - 1.3 * loss);
}

/** The simpler votes, in the same form: existence by share of (weighted) people, class by plurality. */
function countVotes(
  image: PreparedImage,
  candidate: Candidate,
  settings: ConsensusSettings,
  reliability: Reliability,
  model: VoteModel,
  says: readonly Say[],
): Float64Array {
  const nothing = model.classIds.length;
  const tally = new Float64Array(nothing + 1);
  says.forEach(({ said, weight }, annotator) => {
    const known = reliability.annotators[image.annotatorIds[annotator]!] ?? reliability.typical;
    tally[said]! += settings.votes === "weighted" ? weight * known.quality : weight;
  });
  const total = tally.reduce((sum, share) => sum + share, 0);
  return total > 0 ? tally.map((share) => share / total) : tally.fill(1 / (nothing + 1));
}

function reportOn(state: JudgedImage): ImageConsensus {
  const { image, judged, reliability, settings, model } = state;
  const indexed = judged.map((one, index) => ({ one, index }));
  const order = indexed
    .filter(({ one }) => one.accepted)
    .sort((a, b) => b.one.support - a.one.support || b.one.real - a.one.real || a.index - b.index);
  const agreed = order.map(({ one }) => agreedInstance(state, one));
  const leftOut = leftOutInstances(state);
  const expected: Expected[] = judged.map((one) => ({
    right: one.real * one.classProbability,
    real: one.real,
    included: one.accepted,
    iou: predictIou(one.fusion, reliability.iouShift),
  }));
  const realCount = judged.reduce((sum, { real }) => sum + real, 0);
  const predictedQuality = expectedQuality(expected, realCount * missedByAll(state));
  const agreement = agreementOf(judged);
  const { verdict, reason } = verdictOf(image, agreement, agreed.length, judged, settings);
  return {
    agreed,
    leftOut,
    scores: scoreAnnotators(state, model),
    agreement,
    predictedQuality,
    verdict,
    reason,
  };
}

/** Odds that an object was overlooked by everybody, for one that was not. */
function missedByAll({ image, reliability }: JudgedImage): number {
  let missed = 1;
  for (const id of image.annotatorIds)
    missed *= 1 - (reliability.annotators[id] ?? reliability.typical).detection.value;
  return image.annotatorIds.length === 0 ? 0 : missed / Math.max(0.05, 1 - missed);
}

/**
 * Share of the merged labels that another group of the same size would confirm: existence and class by
 * their probabilities, shapes by the stepped-up pairwise IoU; candidates that stay in doubt count against it.
 */
function agreementOf(judged: readonly Judged[]): number {
  let confirmed = 0;
  let all = 0;
  for (const { accepted, real, classProbability, fusion } of judged) {
    if (accepted) {
      confirmed += real * classProbability * stepUp(fusion.pairIou, fusion.count);
      all += 1;
    } else all += real;
  }
  return all > 1e-9 ? Math.min(1, confirmed / all) : 1;
}

function verdictOf(
  image: PreparedImage,
  agreement: number,
  agreedCount: number,
  judged: readonly Judged[],
  settings: ConsensusSettings,
): { verdict: Verdict; reason: string } {
  const n = image.annotatorIds.length;
  const doubtful = judged.filter(({ accepted, real }) => (accepted ? real < 0.8 : real > 0.2)).length;
  const figures = `agreement ${percent(agreement)} of the ${percent(settings.agreementTarget)} asked for`;
  const doubt =
    doubtful > 0 ? `; ${doubtful === 1 ? "1 object is" : `${doubtful} objects are`} in doubt` : "";
  if (n < settings.kMin) {
    const so =
      n === 0
        ? "Nobody has labelled this image yet"
        : `Only ${people(n)} ${n === 1 ? "has" : "have"} labelled this image`;
    return { verdict: "short", reason: `${so}; at least ${settings.kMin} are needed.` };
  }
  if (agreement >= settings.agreementTarget) {
    if (agreedCount === 0)
      return { verdict: "settled", reason: `${people(n)} looked and agree that there is nothing to label.` };
    return { verdict: "settled", reason: `${people(n)}, ${figures}.` };
  }
  if (n < settings.kMax)
    return { verdict: "short", reason: `${people(n)}, ${figures}${doubt}. One more person is asked.` };
  return { verdict: "split", reason: `${people(n)}, the most that are asked, ${figures}${doubt}.` };
}

function agreedInstance(state: JudgedImage, one: Judged): AgreedInstance {
  const { image, model, reliability, settings } = state;
  const { candidate } = one;
  const fused = one.fused!;
  const classId = model.classIds[one.classIndex]!;
  const members = candidate.members
    .filter((item) => image.items[item]!.instance.classId === classId)
    .map((item) => ({
      annotatorId: image.annotatorIds[image.items[item]!.annotator]!,
      instanceId: image.items[item]!.instance.id,
      iou: fused.iouOf.get(image.items[item]!.annotator) ?? 0,
    }));
  const spread = Number.isNaN(candidate.meanPairIou) ? 0 : 1 - candidate.meanPairIou;
  return {
    classId,
    shape: fused.shape,
    box: fused.box,
    score: one.real,
    classProbability: one.classProbability,
    predictedIou: predictIou(one.fusion, reliability.iouShift),
    support: one.support,
    seen: image.voterCount,
    spread,
    crowd: candidate.members.some((item) => image.items[item]!.instance.crowd),
    members,
    why: whyAgreed(state, one, classId, spread, settings),
  };
}

function whyAgreed(
  { image }: JudgedImage,
  { candidate, support, fusion }: Judged,
  classId: string,
  spread: number,
  settings: ConsensusSettings,
): string {
  const parts = [`${peopleOf(support, image.voterCount)} drew this as ${nameOf(classId, settings)}`];
  const others = new Map<string, number>();
  for (const item of candidate.members) {
    const other = image.items[item]!.instance.classId;
    if (other !== classId) others.set(other, (others.get(other) ?? 0) + 1);
  }
  for (const [other, count] of [...others].sort())
    parts.push(`${people(count)} called it ${nameOf(other, settings)}`);
  if (fusion.count > 1) parts.push(`their shapes differ by ${percent(spread)}`);
  if (candidate.coverers.length > 0)
    parts.push(`${people(candidate.coverers.length)} drew it together with a neighbour`);
  if (candidate.parts.length > 0) {
    const who = new Set(candidate.parts.map((item) => image.items[item]!.annotator));
    parts.push(`${people(who.size)} drew only a part of it, or drew it in parts`);
  }
  if (image.voterCount < image.annotatorIds.length) parts.push("people whose labels are copies count as one");
  return `${parts.join("; ")}.`;
}

function leftOutInstances(state: JudgedImage): LeftOutInstance[] {
  const { image, candidates, judged, model, settings } = state;
  const out: LeftOutInstance[] = [];
  const add = (item: number, reason: LeftOutInstance["reason"], why: string) => {
    const { annotator, instance } = image.items[item]!;
    out.push({ annotatorId: image.annotatorIds[annotator]!, instanceId: instance.id, reason, why });
  };
  for (const [item, explanation] of candidates.explained)
    add(item, explanation.reason, whyExplained(explanation));
  for (const { candidate, accepted, classIndex, support, real } of judged) {
    const agreedClass = model.classIds[classIndex] ?? "";
    for (const item of candidate.members) {
      const { classId } = image.items[item]!.instance;
      if (!accepted) {
        const nearest = nearestAgreed(state, item);
        if (nearest >= 0.1) {
          add(
            item,
            "low-overlap",
            `It overlaps an agreed object by only ${percent(nearest)}, too little to be the same one.`,
          );
        } else {
          const chance = real < 0.005 ? "less than 1 %" : percent(real);
          add(
            item,
            "unsupported",
            `${peopleOf(support, image.voterCount)} drew this; the chance that it is real is ${chance}.`,
          );
        }
      } else if (classId !== agreedClass) {
        add(
          item,
          "outvoted-class",
          `The object is agreed as ${nameOf(agreedClass, settings)}; this called it ${nameOf(classId, settings)}.`,
        );
      }
    }
  }
  const key = ({ annotatorId, instanceId }: LeftOutInstance) => `${annotatorId}\u0000${instanceId}`;
  return out.sort((a, b) => (key(a) < key(b) ? -1 : key(a) > key(b) ? 1 : 0));
}

/** Largest IoU with an agreed shape, by boxes: only the order of magnitude is said. */
function nearestAgreed({ image, judged }: JudgedImage, item: number): number {
  const { spans } = image.items[item]!;
  let best = 0;
  for (const { fused } of judged) if (fused) best = Math.max(best, boxIou(spans.box, fused.box));
  return best;
}
