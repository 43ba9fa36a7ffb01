import { createHash } from "node:crypto";
import { setTimeout as sleep } from "node:timers/promises";
import { getDb } from "@/db/client";
import { countPendingImages, findBatch, listClasses, listImages } from "@/db/queries/batches";
import { balanceOf } from "@/db/queries/ledger";
import type { Actor } from "@/lib/auth/actor";
import type { ClassInput } from "@/lib/contracts/batches";
import { env } from "@/lib/env";
import { accountId } from "@/lib/ledger/posting";
import { createBatch } from "@/lib/market/batches/createBatch";
import { saveKeyAndBrief, saveQualityAndPay } from "@/lib/market/batches/editBatch";
import { publishBatch, quoteOf } from "@/lib/market/batches/publishBatch";
import { completeUpload } from "@/lib/market/images/completeUpload";
import { planUploads } from "@/lib/market/images/planUploads";
import { settleCheckout } from "@/lib/market/money/checkout";
import { startTopUp } from "@/lib/market/money/topUp";

export type PictureFile = { name: string; bytes: Buffer };

export type BatchPlan = {
  title: string;
  classes: Omit<ClassInput, "id">[];
  brief: string;
  pictures: PictureFile[];
  kMin: number;
  kMax: number;
  agreementTarget: number;
  expectedInstances: number;
  pay: { baseCents: number; boxCents: number; polygonCents: number; capCents: number };
};

const WAIT_MS_MAX = 240_000;

/** Waits until the condition holds; the worker and the stand-ins do the rest. */
export async function until(what: string, holds: () => boolean): Promise<void> {
  const deadline = Date.now() + WAIT_MS_MAX;
  while (!holds()) {
    if (Date.now() > deadline) throw new Error(`waited too long: ${what}`);
    await sleep(100);
  }
}

/**
 * Puts money on a team's wallet through Checkout, as a person would. The stand-in's webhook is held back
 * while the payment is settled here, at the demo's own time: the webhook would book it at the time of the
 * start, after the weeks that the demo plays. When it comes it finds the payment booked.
 */
export async function topUpWallet({
  actor,
  teamId,
  amountCents,
  nowMs,
}: {
  actor: Actor;
  teamId: string;
  amountCents: number;
  nowMs: number;
}): Promise<void> {
  const wallet = accountId("wallet", teamId);
  const before = balanceOf(getDb(), wallet);
  const { url } = await startTopUp({ actor, nowMs, teamId, amountCents, returnPath: "/wallet" });
  const sessionId = new URL(url).pathname.split("/").pop();
  if (!sessionId) throw new Error("the payment page has no session");
  await control("webhooks", { paused: true });
  try {
    await control("pay-session", { id: sessionId, card: "4242424242424242" });
    await settleCheckout(sessionId, nowMs);
  } finally {
    await control("webhooks", { paused: false });
  }
  await until("the wallet is credited", () => balanceOf(getDb(), wallet) === before + amountCents);
}

async function control(verb: string, input: Record<string, unknown>): Promise<void> {
  const answer = await fetch(`${env().STRIPE_API_BASE}/_control/${verb}`, {
    method: "POST",
    headers: { "content-type": "application/json", connection: "close" },
    body: JSON.stringify(input),
  });
  if (!answer.ok) throw new Error(`the stand-in refused ${verb}: ${answer.status} ${await answer.text()}`);
}

/** Posts a batch by the same steps as a requester: draft, pictures, key and brief, pay, fund. Returns its id. */
export async function postBatch({
  actor,
  teamId,
  plan,
  nowMs,
}: {
  actor: Actor;
  teamId: string;
  plan: BatchPlan;
  nowMs: number;
}): Promise<string> {
  const db = getDb();
  const batchId = createBatch({ actor, nowMs, teamId, title: plan.title });
  await uploadPictures({ actor, batchId, pictures: plan.pictures, nowMs });
  const version = () => findBatch(db, batchId)?.version ?? 0;
  const [first, second] = listImages(db, batchId, { limit: 2 });
  saveKeyAndBrief({
    actor,
    nowMs,
    batchId,
    input: {
      title: plan.title,
      classes: plan.classes.map((entry) => ({ id: null, ...entry })),
      brief: plan.brief,
      examples: [
        ...(first
          ? [{ imageId: first.id, caption: "Outline what you can see, not what you guess under the weed." }]
          : []),
        ...(second ? [{ imageId: second.id, caption: "Small things count too: look along the edge." }] : []),
      ],
      sensitive: false,
      sensitiveNote: "",
      safetyCritical: false,
      versionSeen: version(),
    },
  });
  const { kMin, kMax, agreementTarget, expectedInstances, pay } = plan;
  saveQualityAndPay({
    actor,
    nowMs,
    batchId,
    input: {
      kMin,
      kMax,
      agreementTarget,
      expectedInstances,
      ...pay,
      floorHourlyCents: 1200,
      versionSeen: version(),
    },
  });
  await until("every picture is checked", () => countPendingImages(db, batchId) === 0);
  const batch = findBatch(db, batchId);
  if (!batch) throw new Error("the batch is gone");
  const ready = listImages(db, batchId, { limit: 1000 }).filter((image) => image.status === "ready").length;
  if (ready !== plan.pictures.length)
    throw new Error(`${plan.pictures.length - ready} pictures of ${plan.title} were refused`);
  const cost = quoteOf(batch, listClasses(db, batchId), ready);
  const worstCentsSeen = cost.worstCents + cost.worstFeeCents;
  const missing = worstCentsSeen - balanceOf(db, accountId("wallet", teamId));
  if (missing > 0) await topUpWallet({ actor, teamId, amountCents: Math.ceil(missing / 5000) * 5000, nowMs });
  publishBatch({ actor, nowMs, batchId, versionSeen: version(), worstCentsSeen });
  return batchId;
}

async function uploadPictures({
  actor,
  batchId,
  pictures,
  nowMs,
}: {
  actor: Actor;
  batchId: string;
  pictures: PictureFile[];
  nowMs: number;
}): Promise<void> {
  const files = pictures.map(({ name, bytes }) => ({
    name,
    byteSize: bytes.byteLength,
    mediaType: "image/jpeg",
    sha256: createHash("sha256").update(bytes).digest("hex"),
  }));
  const plans = await planUploads({ actor, nowMs, batchId, files });
  for (const [index, plan] of plans.entries()) {
    const picture = pictures[index];
    if (plan.kind !== "put" || !picture) throw new Error(`no upload was planned for ${picture?.name}`);
    const answer = await fetch(plan.url, {
      method: "PUT",
      // A connection of its own: a kept one may have been closed while annotators were being played.
      headers: { ...plan.headers, connection: "close" },
      body: new Uint8Array(picture.bytes),
    });
    if (!answer.ok)
      throw new Error(`the store refused ${picture.name}: ${answer.status} ${await answer.text()}`);
    await completeUpload({ actor, nowMs, imageId: plan.imageId, parts: [] });
  }
}
