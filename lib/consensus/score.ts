import { nameOf, whyExplained, type Judged, type JudgedImage } from "./judged";
import type { AnnotatorScore, InstanceScore } from "./types";
import { posteriorOf, type VoteModel } from "./votes";
import { people, percent } from "./words";

/** What the others alone make of one candidate. */
type Others = {
  real: number;
  classIndex: number;
  posterior: Float64Array;
  iou: number | null;
  count: number;
};

/**
 * Scores every annotator against the consensus of the others: the own vote, those of people who copy the same
 * source, and the own outline are taken out before the candidate is judged again. Only the grouping of instances
 * into candidates has seen them. With one annotator there is nobody to compare with: the quality is then
 * what is known of the person beforehand. O(annotators x candidates x nodes).
 */
export function scoreAnnotators(state: JudgedImage, model: VoteModel): AnnotatorScore[] {
  return state.image.annotatorIds.map((annotatorId, annotator) =>
    state.image.voterCount < 2
      ? alone(state, annotatorId, annotator)
      : against(state, model, annotatorId, annotator),
  );
}

function alone({ image, reliability }: JudgedImage, annotatorId: string, annotator: number): AnnotatorScore {
  const instances = image.itemsOf[annotator]!.map((item): InstanceScore => ({
    instanceId: image.items[item]!.instance.id,
    outcome: "agreed",
    iou: null,
    why: "Nobody else has labelled this image yet, so there is nothing to compare with.",
  }));
  const { quality } = reliability.annotators[annotatorId] ?? reliability.typical;
  return { annotatorId, found: instances.length, missed: 0, spurious: 0, meanIou: null, quality, instances };
}

function against(
  state: JudgedImage,
  model: VoteModel,
  annotatorId: string,
  annotator: number,
): AnnotatorScore {
  const { image, candidates, judged, settings } = state;
  const outcomes = new Map<number, InstanceScore>();
  const put = (item: number, outcome: InstanceScore["outcome"], iou: number | null, why: string) =>
    outcomes.set(item, { instanceId: image.items[item]!.instance.id, outcome, iou, why });
  let found = 0;
  let missed = 0;
  let spurious = 0;
  const ious: number[] = [];
  const tally = { overlap: 0, right: 0, wrong: 0, lost: 0 };
  for (const one of judged) {
    const others = judgedByOthers(state, model, one, annotator);
    const own = one.candidate.members.find((item) => image.items[item]!.annotator === annotator);
    if (own === undefined) {
      tally.lost += others.real;
      if (others.real >= settings.existenceCut && others.count > 0) missed++;
      continue;
    }
    const { classId } = image.items[own]!.instance;
    const ownIndex = model.classIndex.get(classId);
    const right = ownIndex === undefined ? 0 : others.posterior[ownIndex]!;
    const iou = others.iou;
    // As in panoptic quality, an overlap of one half or less is no match.
    const matched = iou === null || iou > 0.5 ? right : 0;
    tally.right += matched;
    tally.overlap += matched * (iou ?? 1 - state.reliability.typical.outlineLoss);
    tally.wrong += 1 - matched;
    tally.lost += others.real - matched;
    if (others.real < settings.existenceCut || others.count === 0) {
      spurious++;
      put(
        own,
        "unsupported",
        null,
        `None or too few of the ${people(image.voterCount - 1)} others drew anything here.`,
      );
    } else if (ownIndex !== others.classIndex) {
      const called = nameOf(model.classIds[others.classIndex]!, settings);
      put(own, "wrong-class", iou, `The others call this ${called}, not ${nameOf(classId, settings)}.`);
    } else {
      found++;
      if (iou !== null) ious.push(iou);
      if (iou !== null && iou < settings.looseIou) {
        put(
          own,
          "loose",
          iou,
          `It overlaps what the others drew by ${percent(iou)}; at least ${percent(settings.looseIou)} is expected.`,
        );
      } else {
        put(
          own,
          "agreed",
          iou,
          `${people(others.count)} among the others drew this too${iou === null ? "" : `; overlap ${percent(iou)}`}.`,
        );
      }
    }
  }
  for (const item of image.itemsOf[annotator]!) {
    const explanation = candidates.explained.get(item);
    if (!explanation) continue;
    if (explanation.reason === "duplicate") {
      spurious++;
      tally.wrong += 1;
    }
    put(item, explanation.reason === "duplicate" ? "duplicate" : "loose", null, whyExplained(explanation));
  }
  const denominator = tally.right + (tally.wrong + tally.lost) / 2;
  return {
    annotatorId,
    found,
    missed,
    spurious,
    meanIou: ious.length > 0 ? ious.reduce((sum, iou) => sum + iou, 0) / ious.length : null,
    quality: denominator > 1e-9 ? Math.min(1, tally.overlap / denominator) : 1,
    instances: image.itemsOf[annotator]!.map((item) => outcomes.get(item)!),
  };
}

function judgedByOthers(state: JudgedImage, model: VoteModel, one: Judged, annotator: number): Others {
  const { image } = state;
  const voter = image.voterOf[annotator]!;
  const says = one.says.filter((_, other) => image.voterOf[other] !== voter);
  const posterior = posteriorOf(model, says);
  const nothing = model.classIds.length;
  let classIndex = 0;
  for (let t = 1; t < nothing; t++) if (posterior[t]! > posterior[classIndex]!) classIndex = t;
  const supporters = new Set<number>();
  one.candidate.saidBy.forEach((item, other) => {
    if (item >= 0 && image.voterOf[other] !== voter) supporters.add(image.voterOf[other]!);
  });
  const iou = one.fused?.withoutIou.get(annotator) ?? NaN;
  return {
    real: 1 - posterior[nothing]!,
    classIndex,
    posterior,
    iou: Number.isNaN(iou) ? null : iou,
    count: supporters.size,
  };
}
