import { getDb } from "@/db/client";
import { findSettled, Renderer } from "./pictures";
import { postBatch, topUpWallet, until } from "./batches";
import { drawBatch } from "./drawing";
import { CARE, seedPeople, type AnnotatorKey } from "./people";
import { GLASSHOUSE, NEAP_TIDE, SPRING_TIDE } from "./plans";
import { env } from "@/lib/env";
import { findUser } from "@/db/queries/people";
import { findDispute, listDocket, listSubmissionsOf } from "@/db/queries/work";
import { listReleases } from "@/db/queries/batches";
import { contestImage, contestScore } from "@/lib/market/disputes/openDispute";
import { confirmProposal, decideDispute } from "@/lib/market/disputes/decideDispute";
import { requestPayout, startOnboarding } from "@/lib/market/money/payouts";
import { requestRelease } from "@/lib/market/releases/requestRelease";
import { ensureBucket } from "@/lib/services/store";

const DAY_MS = 86_400_000;

/**
 * Plays the demo's first weeks through the same use cases, worker and stand-ins as real ones: three batches
 * of rendered pictures, one settled with a dispute decided, one half done, one open and waiting.
 */
async function main(): Promise<void> {
  const db = getDb();
  const now = Date.now();
  const say = (line: string) => console.log(`${((Date.now() - now) / 1000).toFixed(1)} s  ${line}`);
  // Rendering is the longest part: all of it begins at once, on threads, in the order in which it is needed.
  const renderer = new Renderer();
  const springPictures = renderer.render(SPRING_TIDE);
  const neapPictures = renderer.render(NEAP_TIDE);
  const glassPictures = renderer.render(GLASSHOUSE);
  await ensureBucket();
  const { actors, teamId } = await seedPeople(db, now - 30 * DAY_MS);
  await topUpWallet({ actor: actors.ines, teamId, amountCents: 25_000, nowMs: now - 21 * DAY_MS });
  say("people and wallet");

  const springId = await postBatch({
    actor: actors.ines,
    teamId,
    plan: { ...SPRING_TIDE, pictures: await springPictures },
    nowMs: now - 6 * DAY_MS,
  });
  say("spring tide posted");
  drawBatch({
    batchId: springId,
    actors,
    annotators: annotators("tomas", "maren", "kofi", "lioba", "jory", "bram"),
    fromMs: now - 2 * DAY_MS,
    share: 1,
  });
  say("spring tide drawn");
  decideOpen(now - DAY_MS);
  contestOne();
  say("spring tide settled, a dispute decided");

  await postBatch({
    actor: actors.ines,
    teamId,
    plan: { ...NEAP_TIDE, pictures: await neapPictures },
    nowMs: now - 0.9 * DAY_MS,
  });
  say("neap tide posted");
  const glassId = await postBatch({
    actor: actors.rowan,
    teamId,
    plan: { ...GLASSHOUSE, pictures: await glassPictures },
    nowMs: now - 0.8 * DAY_MS,
  });
  say("glasshouse posted");
  drawBatch({
    batchId: glassId,
    actors,
    annotators: annotators("sanna", "elin", "tomas", "bram", "maren"),
    fromMs: now - DAY_MS / 2,
    share: 0.5,
  });
  openOne();
  say("glasshouse half drawn");

  await renderer.close();
  await payTomas();
  const releaseId = requestRelease({ actor: actors.ines, nowMs: Date.now(), batchId: springId });
  await until("the release is built", () =>
    listReleases(db, springId).some((release) => release.id === releaseId && release.status !== "building"),
  );
  say("release built, payout made");

  function annotators(...keys: AnnotatorKey[]) {
    return keys.map((key) => ({ actor: actors[key], care: CARE[key] }));
  }

  /** An admin decides what the people could not agree on: the closest of the submissions is taken. */
  function decideOpen(atMs: number): void {
    for (const { dispute } of listDocket(db, "open", atMs)) {
      const list = listSubmissionsOf(db, dispute.imageId);
      const best = list.find((submission) => submission.annotatorId === actors.tomas.id) ?? list[0];
      if (!best) continue;
      decideDispute({
        actor: actors.ada,
        nowMs: atMs,
        disputeId: dispute.id,
        decision: {
          outcome: "pick",
          submissionId: best.id,
          reason:
            "This submission follows the visible edges as the brief asks and misses nothing; the others differ by what they left out.",
        },
      });
      confirm(dispute.id, atMs);
    }
  }

  /** Where so much is at stake that two admins must agree, a second one does. */
  function confirm(disputeId: string, atMs: number): void {
    const proposedAtMs = findDispute(db, disputeId)?.proposedAtMs;
    if (proposedAtMs)
      confirmProposal({
        actor: actors.edda,
        nowMs: atMs + 3_600_000,
        disputeId,
        answer: { verdict: "confirm", proposedAtMs },
      });
  }

  /** The one whose work scores worst contests it; the admin looks and keeps the result, with a reason. */
  function contestOne(): void {
    const settled = findSettled(db, springId);
    const list = settled ? listSubmissionsOf(db, settled.id) : [];
    const contested = [...list]
      .filter((submission) => submission.quality !== null)
      .sort((a, b) => (a.quality ?? 0) - (b.quality ?? 0))[0];
    const annotator = contested && Object.values(actors).find((actor) => actor.id === contested.annotatorId);
    if (!contested || !annotator) return;
    const disputeId = contestScore({
      actor: annotator,
      nowMs: now - DAY_MS,
      submissionId: contested.id,
      errorKind: "outline",
      reason: "I drew the rope under the weed as well, because one can see where it goes. Please count it.",
    });
    decideDispute({
      actor: actors.ada,
      nowMs: now - DAY_MS / 2,
      disputeId,
      decision: {
        outcome: "keep",
        reason:
          "The brief asks for the visible part only. The outline goes on under the weed, so it is rightly not counted; the rest of your work was.",
      },
    });
  }

  /** One picture of the second batch waits on the docket for the visitor. */
  function openOne(): void {
    if (listDocket(db, "open", now).length > 0) return;
    const image = findSettled(db, glassId);
    if (image)
      contestImage({
        actor: actors.rowan,
        nowMs: Date.now(),
        imageId: image.id,
        errorKind: "outline",
        classId: null,
        reason: "Two seedlings that touch were merged into one in the second row. Please look again.",
      });
  }

  async function payTomas(): Promise<void> {
    await startOnboarding({ actor: actors.tomas, nowMs: Date.now() });
    const account = findUser(db, actors.tomas.id)?.stripeAccountId;
    const answer = await fetch(`${env().STRIPE_API_BASE}/_control/complete-onboarding`, {
      method: "POST",
      headers: { "content-type": "application/json", connection: "close" },
      body: JSON.stringify({ account }),
    });
    if (!answer.ok) throw new Error(`onboarding failed: ${answer.status} ${await answer.text()}`);
    await until("the payout account is ready", () => findUser(db, actors.tomas.id)?.payoutsEnabled === true);
    requestPayout({ actor: actors.tomas, nowMs: Date.now() });
  }
}

main().then(
  () => process.exit(0),
  (error: unknown) => {
    console.error(error);
    process.exit(1);
  },
);
