import { getDb } from "@/db/client";
import { findImage, listClasses, listImages } from "@/db/queries/batches";
import type { Actor } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { claimTask } from "@/lib/market/work/claimTask";
import { submitWork } from "@/lib/market/work/submitWork";
import { AppError } from "@/lib/errors";
import type { CARE } from "./people";
import { truthOf } from "./pictures";
import { annotate } from "./scenes/annotate";

type Annotator = { actor: Actor; care: (typeof CARE)[keyof typeof CARE] };
type Input = {
  batchId: string;
  actors: Record<string, Actor>;
  annotators: Annotator[];
  fromMs: number;
  share: number;
};

/** Seconds that an instance and a picture take by care; careful people are slower. */
const SECONDS: Record<Annotator["care"], { image: number; instance: number }> = {
  careful: { image: 24, instance: 16 },
  steady: { image: 20, instance: 13 },
  hasty: { image: 14, instance: 9 },
  careless: { image: 10, instance: 7 },
};

/**
 * Plays annotators on a share of a batch's pictures: each claims, draws with the errors of their care, and
 * hands in, in turn, until every picture of the share is settled, split, or out of people.
 */
export function drawBatch({ batchId, annotators, fromMs, share }: Input): void {
  const db = getDb();
  const key = new Map(listClasses(db, batchId).map((row) => [row.name, row]));
  const images = listImages(db, batchId, { limit: 1000 });
  let clockMs = fromMs;
  images.slice(0, Math.ceil(images.length * share)).forEach((image, index) => {
    for (let turn = 0; turn < annotators.length; turn++) {
      const annotator = annotators[(index + turn) % annotators.length];
      const state = findImage(db, image.id);
      if (!annotator || !state || state.consensusState === "settled" || state.consensusState === "split")
        break;
      try {
        const claim = claimTask({ actor: annotator.actor, nowMs: clockMs, batchId, imageId: image.id });
        const document = draw(image.fileName, annotator, key, index * 31 + turn);
        const pace = SECONDS[annotator.care];
        const activeSeconds = pace.image + pace.instance * document.instances.length;
        clockMs += activeSeconds * 1000;
        submitWork({ actor: annotator.actor, nowMs: clockMs, claimId: claim.id, document, activeSeconds });
        settleImage({ imageId: image.id, nowMs: clockMs + 1000 });
        clockMs += 60_000;
      } catch (error) {
        if (!(error instanceof AppError)) throw error; // somebody has no place on this picture: the next one tries
      }
    }
  });
}

function draw(
  fileName: string,
  { care }: Annotator,
  key: Map<string, { id: string; geometry: "box" | "polygon" }>,
  seed: number,
): DeskDocument {
  const drawn = annotate(truthOf(fileName), care, seed);
  const instances = drawn.flatMap((instance, index) => {
    const kind = key.get(instance.className);
    if (!kind) return [];
    const wantsBox = kind.geometry === "box";
    return [
      {
        id: `drawn-${index}`,
        classId: kind.id,
        shape: wantsBox
          ? ({ kind: "box", box: instance.box } as const)
          : ({ kind: "polygon", rings: instance.rings } as const),
        origin: "drawn" as const,
        proposalId: null,
        crowd: false,
        occluded: instance.occluded,
        truncated: false,
        note: "",
      },
    ];
  });
  return { instances, dismissedProposalIds: [] };
}
