import { eq } from "drizzle-orm";
import { inTransaction, type Db } from "@/db/client";
import { findBatch, listClasses } from "@/db/queries/batches";
import { balanceOf, insertPosting } from "@/db/queries/ledger";
import { batches, images, jobs, teamMembers, teams, users } from "@/db/schema";
import type { Actor, Role } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import { AppError, type ErrorCode } from "@/lib/errors";
import type { Box } from "@/lib/geometry/types";
import { newId } from "@/lib/ids";
import { accountId, type AccountKind } from "@/lib/ledger/posting";
import { topUpPosting } from "@/lib/ledger/postings";
import { createBatch } from "@/lib/market/batches/createBatch";
import { saveKeyAndBrief, saveQualityAndPay } from "@/lib/market/batches/editBatch";
import { publishBatch, quoteOf } from "@/lib/market/batches/publishBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { claimTask } from "@/lib/market/work/claimTask";
import { submitWork } from "@/lib/market/work/submitWork";

/** The moment at which every test history begins. */
export const START_MS = Date.UTC(2026, 2, 2, 9);
export const MINUTE_MS = 60_000;
export const HOUR_MS = 60 * MINUTE_MS;

let people = 0;

/** A confirmed account of a role. */
export function person(db: Db, role: Role, more: Partial<typeof users.$inferInsert> = {}): Actor {
  people += 1;
  const id = newId("usr");
  const name = more.name ?? `${role} ${people}`;
  const email = more.email ?? `${role}${people}@skerrow.example`;
  db.insert(users)
    .values({ id, email, name, role, emailVerifiedAtMs: START_MS, createdAtMs: START_MS, ...more })
    .run();
  return { id, role, name, email };
}

/** A team with the person as member; its wallet holds `walletCents`. */
export function team(db: Db, owner: Actor, walletCents = 0): string {
  const id = newId("tem");
  db.insert(teams).values({ id, name: "Skerrow Bay Shore Trust", createdAtMs: START_MS }).run();
  join(db, id, owner, "owner");
  if (walletCents > 0) credit(db, id, walletCents);
  return id;
}

export function join(db: Db, teamId: string, actor: Actor, role: "owner" | "editor" | "viewer"): void {
  db.insert(teamMembers).values({ teamId, userId: actor.id, role, joinedAtMs: START_MS }).run();
}

/** A card payment has arrived in the wallet. */
export function credit(db: Db, teamId: string, cents: number): void {
  inTransaction(db, (tx) =>
    insertPosting(tx, {
      source: "stripe",
      sourceId: newId("pay"),
      kind: "topup",
      posting: topUpPosting(teamId, cents),
      memo: "Card payment",
      nowMs: START_MS,
    }),
  );
}

export const PAY = { baseCents: 5, boxCents: 3, polygonCents: 6, capCents: 40 };

type BatchOptions = {
  imageCount?: number;
  kMin?: number;
  kMax?: number;
  agreementTarget?: number;
  sensitive?: boolean;
  pay?: typeof PAY;
  nowMs?: number;
};

/** A draft that could be funded: checked images without stored bytes, two classes, a brief. */
export function draftBatch(db: Db, owner: Actor, teamId: string, options: BatchOptions = {}): string {
  const { imageCount = 1, kMin = 2, kMax = 3, agreementTarget = 0.7, sensitive = false, pay = PAY } = options;
  const nowMs = options.nowMs ?? START_MS;
  const batchId = createBatch({ actor: owner, nowMs, teamId, title: "Wrack line, spring tide" });
  for (let ordinal = 0; ordinal < imageCount; ordinal++) image(db, batchId, { ordinal });
  saveKeyAndBrief({
    actor: owner,
    nowMs,
    batchId,
    input: {
      title: "Wrack line, spring tide",
      classes: [
        { id: null, number: 1, name: "bottle", colour: "#0072b2", pattern: "solid", geometry: "box" },
        { id: null, number: 2, name: "rope", colour: "#d55e00", pattern: "stripes", geometry: "polygon" },
      ],
      brief: "Draw every bottle and every rope.",
      examples: [],
      sensitive,
      sensitiveNote: "",
      safetyCritical: false,
      versionSeen: versionOf(db, batchId),
    },
  });
  const versionSeen = versionOf(db, batchId);
  saveQualityAndPay({
    actor: owner,
    nowMs,
    batchId,
    input: { ...pay, kMin, kMax, agreementTarget, expectedInstances: 3, floorHourlyCents: 1200, versionSeen },
  });
  return batchId;
}

/** A checked image of 640 x 480 px, with nothing in the object store. */
export function image(db: Db, batchId: string, more: Partial<typeof images.$inferInsert> = {}): string {
  const id = newId("img");
  const ordinal = more.ordinal ?? 0;
  db.insert(images)
    .values({
      id,
      batchId,
      fileName: `pole-${String(ordinal).padStart(3, "0")}.png`,
      byteSize: 1000,
      sha256: id.padEnd(64, "0"),
      mediaType: "image/png",
      status: "ready",
      originalKey: `batches/${batchId}/uploads/${id}`,
      workingKey: `batches/${batchId}/images/${id}`,
      width: 640,
      height: 480,
      ordinal,
      createdAtMs: START_MS,
      ...more,
    })
    .run();
  return id;
}

export function versionOf(db: Db, batchId: string): number {
  return findBatch(db, batchId)?.version ?? 0;
}

/** What publishing a draft would hold now. */
export function holdOf(db: Db, batchId: string): number {
  const batch = findBatch(db, batchId);
  if (!batch) return 0;
  const ready = imagesOf(db, batchId).filter((row) => row.status === "ready").length;
  const { worstCents, worstFeeCents } = quoteOf(batch, listClasses(db, batchId), ready);
  return worstCents + worstFeeCents;
}

export function publish(db: Db, owner: Actor, batchId: string, nowMs = START_MS): void {
  const versionSeen = versionOf(db, batchId);
  publishBatch({ actor: owner, nowMs, batchId, versionSeen, worstCentsSeen: holdOf(db, batchId) });
}

export type Market = {
  db: Db;
  owner: Actor;
  teamId: string;
  admin: Actor;
  annotators: Actor[];
  batchId: string;
  imageIds: string[];
};

/** A requester with a funded, open batch, five annotators and an admin. */
export function openMarket(db: Db, options: BatchOptions & { walletCents?: number } = {}): Market {
  const owner = person(db, "requester");
  const teamId = team(db, owner, options.walletCents ?? 1_000_000);
  const batchId = draftBatch(db, owner, teamId, options);
  publish(db, owner, batchId);
  return {
    db,
    owner,
    teamId,
    admin: person(db, "admin"),
    annotators: Array.from({ length: 5 }, () => person(db, "annotator")),
    batchId,
    imageIds: imagesOf(db, batchId).map((row) => row.id),
  };
}

export function imagesOf(db: Db, batchId: string) {
  return db.select().from(images).where(eq(images.batchId, batchId)).orderBy(images.ordinal).all();
}

export function classId(db: Db, batchId: string, name: "bottle" | "rope"): string {
  return listClasses(db, batchId).find((row) => row.name === name)?.id ?? "";
}

/** A drawing of boxes of one class. */
export function drawing(kind: string, boxes: readonly Box[]): DeskDocument {
  const instances = boxes.map((box, index): DeskDocument["instances"][number] => ({
    id: `shape-${index + 1}`,
    classId: kind,
    shape: { kind: "box", box },
    origin: "drawn",
    proposalId: null,
    crowd: false,
    occluded: false,
    truncated: false,
    note: "",
  }));
  return { instances, dismissedProposalIds: [] };
}

/**
 * Three bottles as one person draws them: the same objects for every `hand`, a few px apart, as hands are.
 * Nearly equal boxes would be taken for copies of one another, and copies have one vote.
 */
export function bottles(hand = 0): Box[] {
  return [
    [40 + 4 * hand, 60, 80, 120 - 5 * hand],
    [250, 200 + 4 * hand, 90 + 3 * hand, 90],
    [460 - 4 * hand, 320, 100, 70 + 2 * hand],
  ];
}

/** Bottles where nobody else sees any: `place` 0..4 never overlap. */
export function strayBottles(place: number): Box[] {
  return [
    [5 + 125 * place, 5, 60, 60],
    [5 + 125 * place, 400, 60, 60],
  ];
}

/** Claims, draws and hands in. Returns the submission's id. */
export function work(
  market: Market,
  annotator: Actor,
  boxes: readonly Box[],
  { imageId = market.imageIds[0], nowMs = START_MS }: { imageId?: string | undefined; nowMs?: number } = {},
): string {
  const { db, batchId } = market;
  const claim = claimTask({ actor: annotator, nowMs, batchId, imageId });
  const document = drawing(classId(db, batchId, "bottle"), boxes);
  const handedIn = { actor: annotator, nowMs: nowMs + 90_000, claimId: claim.id, document };
  return submitWork({ ...handedIn, activeSeconds: 80 }).submissionId;
}

/** The first image drawn alike by `count` people and settled. Returns the submissions' ids. */
export function settledImage(market: Market, count = 2, nowMs = START_MS): string[] {
  const ids = market.annotators
    .slice(0, count)
    .map((annotator, index) => work(market, annotator, bottles(index), { nowMs }));
  settleImage({ imageId: market.imageIds[0] ?? "", nowMs: nowMs + 2 * MINUTE_MS });
  return ids;
}

/** The first image drawn differently by kMax = 3 people: it goes to the docket. Returns the submissions' ids. */
export function splitImage(market: Market, nowMs = START_MS): string[] {
  const imageId = market.imageIds[0] ?? "";
  return [0, 1, 2].map((index) => {
    const annotator = market.annotators[index];
    if (!annotator) throw new Error("the market has five annotators");
    const id = work(market, annotator, strayBottles(index), { nowMs: nowMs + index * 5 * MINUTE_MS });
    settleImage({ imageId, nowMs: nowMs + index * 5 * MINUTE_MS + 2 * MINUTE_MS });
    return id;
  });
}

export function cents(db: Db, kind: AccountKind, ownerId?: string): number {
  return balanceOf(db, accountId(kind, ownerId));
}

/** Letters in the outbox with a tag. */
export function letters(db: Db, tag: string): { to: string; subject: string; text: string }[] {
  return db
    .select()
    .from(jobs)
    .where(eq(jobs.kind, "mail.send"))
    .all()
    .map((job) => job.payload as { to: string; subject: string; text: string; tag: string })
    .filter((letter) => letter.tag === tag);
}

/** The code of the AppError that `work` throws; "nothing" when it throws none. Another error is rethrown. */
export function refusalOf(attempt: () => unknown): ErrorCode | "nothing" {
  try {
    attempt();
    return "nothing";
  } catch (error) {
    if (error instanceof AppError) return error.code;
    throw error;
  }
}

/** As `refusalOf`, with the words a person reads. */
export function refusalText(attempt: () => unknown): string {
  try {
    attempt();
    return "";
  } catch (error) {
    if (error instanceof AppError) return error.message;
    throw error;
  }
}

export function statusOf(db: Db, batchId: string): string {
  return db.select().from(batches).where(eq(batches.id, batchId)).get()?.status ?? "none";
}
