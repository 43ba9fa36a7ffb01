import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { countAcceptance } from "@/db/queries/proposals";
import { listImages } from "@/db/queries/batches";
import { proposalSets } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { Box } from "@/lib/geometry/types";
import { batchDealing } from "@/lib/market/proposals/batchDealing";
import { claimTask } from "@/lib/market/work/claimTask";
import { submitWork } from "@/lib/market/work/submitWork";
import { freshDb } from "@/tests/support/db";
import { classId, drawing, MINUTE_MS, openMarket, START_MS, type Market } from "@/tests/support/market";

const PROPOSALS = 16;

let db: Db;
let market: Market;
let bottle: string;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 2, kMin: 2, kMax: 3 });
  bottle = classId(db, market.batchId, "bottle");
  for (const { id } of listImages(db, market.batchId, { limit: 10 })) {
    db.insert(proposalSets)
      .values({
        imageId: id,
        batchId: market.batchId,
        model: "any image",
        proposals: Array.from({ length: PROPOSALS }, (_, n) => ({
          id: `${id}-${n}`,
          classId: null,
          box: [20 * n, 300, 15, 15] as const,
          rings: [],
          score: 0.1,
          source: "region",
        })),
        millis: 1,
        createdAtMs: START_MS,
      })
      .run();
  }
});

/** Draws one image of the batch: the first `taken` proposals as they are, the next `adjusted` changed, the rest sent away. */
function draw(actor: Actor, taken: number, adjusted: number): void {
  const claim = claimTask({ actor, nowMs: START_MS, batchId: market.batchId });
  const document = drawing(
    bottle,
    Array.from({ length: taken + adjusted + 1 }, (_, n): Box => [20 * n, 100, 15, 15]),
  );
  submitWork({
    actor,
    nowMs: START_MS + MINUTE_MS,
    claimId: claim.id,
    activeSeconds: 40,
    document: {
      instances: document.instances.map((instance, n) =>
        n < taken + adjusted
          ? {
              ...instance,
              origin: n < taken ? ("taken" as const) : ("adjusted" as const),
              proposalId: `${claim.imageId}-${n}`,
            }
          : instance,
      ),
      dismissedProposalIds: Array.from(
        { length: PROPOSALS - taken - adjusted },
        (_, n) => `${claim.imageId}-${n + taken + adjusted}`,
      ),
    },
  });
}

describe("how the tray deals in a batch", () => {
  it("leaves scores as they are and deals a few in any case before anybody has judged", () => {
    const { dealing, calibration } = batchDealing(db, market.batchId);
    expect(calibration(0.1, "region")).toBe(0.1);
    expect(dealing).toEqual({ adjustedShare: 0.25, firstFew: 6 });
  });

  it("counts what was taken, adjusted, sent away and drawn", () => {
    draw(market.annotators[0]!, 4, 2);
    expect(countAcceptance(db, market.batchId)).toEqual({
      submissions: 1,
      takenBoxes: 4,
      takenOutlines: 0,
      adjustedBoxes: 2,
      adjustedOutlines: 0,
      dismissed: PROPOSALS - 6,
      drawn: 1,
    });
  });

  it("follows what people kept, up and down, and stops dealing for the sake of evidence once there is some", () => {
    draw(market.annotators[0]!, 12, 2);
    draw(market.annotators[1]!, 14, 0);
    const liked = batchDealing(db, market.batchId);
    expect(liked.calibration(0.1, "region")).toBeGreaterThan(0.4);
    expect(liked.dealing.firstFew).toBe(0);
    draw(market.annotators[0]!, 0, 0);
    draw(market.annotators[1]!, 0, 0);
    const mixed = batchDealing(db, market.batchId);
    expect(mixed.calibration(0.1, "region")).toBeLessThan(liked.calibration(0.1, "region"));
  });

  it("says nothing of another batch", () => {
    draw(market.annotators[0]!, 16, 0);
    const other = openMarket(db, { imageCount: 1 });
    expect(batchDealing(db, other.batchId).calibration(0.1, "region")).toBe(0.1);
    expect(countAcceptance(db, other.batchId).submissions).toBe(0);
  });
});
