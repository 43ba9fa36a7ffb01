import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findDraft } from "@/db/queries/work";
import { claims, jobs, submissions } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import { AppError } from "@/lib/errors";
import { claimTask } from "@/lib/market/work/claimTask";
import { deskTask } from "@/lib/market/work/deskTask";
import { heartbeat, releaseClaim, saveDraft } from "@/lib/market/work/keepClaim";
import { documentHash, submitWork } from "@/lib/market/work/submitWork";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  classId,
  drawing,
  draftBatch,
  MINUTE_MS,
  openMarket,
  refusalOf,
  refusalText,
  START_MS,
  work,
  type Market,
} from "@/tests/support/market";

let db: Db;
let market: Market;
let annotator: Actor;
let claimId: string;
let bottle: string;
beforeEach(() => {
  db = freshDb();
  market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3 });
  [annotator] = market.annotators as [Actor];
  claimId = claimTask({ actor: annotator, nowMs: START_MS, batchId: market.batchId }).id;
  bottle = classId(db, market.batchId, "bottle");
});

const by = (minutes = 1) => ({ actor: annotator, nowMs: START_MS + minutes * MINUTE_MS, claimId });
const submit = (document: DeskDocument, activeSeconds = 50) =>
  submitWork({ ...by(), document, activeSeconds });
const all = () => db.select().from(submissions).all();

describe("a draft", () => {
  it("is kept under a rising version and given back to the desk", () => {
    expect(deskTask({ actor: annotator, claimId })).toMatchObject({ draft: null, draftVersion: 0 });
    const document = drawing(bottle, bottles());
    expect(saveDraft({ ...by(), document, version: 0 }).version).toBe(1);
    expect(saveDraft({ ...by(), document: drawing(bottle, []), version: 1 }).version).toBe(2);
    expect(deskTask({ actor: annotator, claimId })).toMatchObject({
      draft: { instances: [], dismissedProposalIds: [] },
      draftVersion: 2,
    });
  });

  it("saved by another tab in between is a conflict, and nothing is overwritten", () => {
    const mine = drawing(bottle, bottles());
    saveDraft({ ...by(), document: mine, version: 0 });
    const attempt = () => saveDraft({ ...by(), document: drawing(bottle, []), version: 0 });
    expect(refusalText(attempt)).toMatch(/another tab/);
    expect(findDraft(db, claimId)?.document).toEqual(mine);
  });

  it("extends the lease, and outlives it", () => {
    const { expiresAtMs } = saveDraft({ ...by(15), document: drawing(bottle, bottles()), version: 0 });
    expect(expiresAtMs).toBe(START_MS + 35 * MINUTE_MS);
    heartbeat(by(50)); // revived
    expect(deskTask({ actor: annotator, claimId }).draft?.instances).toHaveLength(3);
  });

  it("goes when the image is given back or handed in", () => {
    saveDraft({ ...by(), document: drawing(bottle, []), version: 0 });
    submit(drawing(bottle, bottles()));
    expect(findDraft(db, claimId)).toBeUndefined();
    const [, second] = market.annotators as [Actor, Actor];
    const other = claimTask({ actor: second, nowMs: START_MS, batchId: market.batchId }).id;
    const late = { actor: second, nowMs: START_MS, claimId: other };
    saveDraft({ ...late, document: drawing(bottle, []), version: 0 });
    releaseClaim(late);
    expect(findDraft(db, other)).toBeUndefined();
  });
});

describe("handing in", () => {
  it("keeps the drawing with its hash and ends the claim", () => {
    const document = drawing(bottle, bottles());
    const { submissionId } = submit(document);
    const stored = all().find((row) => row.id === submissionId);
    expect(stored).toMatchObject({ claimId, payCents: null, activeSeconds: 50 });
    expect(stored?.document).toEqual(document);
    expect(documentHash(stored?.document ?? drawing("", []))).toBe(stored?.sha256);
    expect(db.select().from(claims).get()).toMatchObject({ status: "submitted", slot: 1 });
  });

  it("said again with the same drawing is answered with the same submission", () => {
    const document = drawing(bottle, bottles());
    expect(submit(document)).toEqual(submit(structuredClone(document)));
    expect(all()).toHaveLength(1);
  });

  it("again with another drawing is a conflict, and the first stays", () => {
    submit(drawing(bottle, bottles()));
    expect(refusalText(() => submit(drawing(bottle, [])))).toMatch(/handed in already/);
    expect(refusalOf(() => saveDraft({ ...by(), document: drawing(bottle, []), version: 0 }))).toBe(
      "conflict",
    );
    expect(refusalOf(() => deskTask({ actor: annotator, claimId }))).toBe("conflict");
    expect(all()[0]?.document.instances).toHaveLength(3);
  });

  it("takes an empty drawing: somebody looked and found nothing", () => {
    expect(submit(drawing(bottle, [])).submissionId).toMatch(/^sub_/);
  });

  it("asks for the consensus with the last submission that is wanted, and once", () => {
    const settling = () =>
      db
        .select()
        .from(jobs)
        .where(eq(jobs.kind, "consensus.settle"))
        .all()
        .map((job) => job.payload);
    submit(drawing(bottle, bottles()));
    expect(settling()).toEqual([]);
    const [, second] = market.annotators as [Actor, Actor];
    work(market, second, bottles());
    expect(settling()).toEqual([{ imageId: market.imageIds[0] }]);
  });

  it("credits no more active time than the claim has existed", () => {
    submit(drawing(bottle, bottles()), 5000);
    expect(all()[0]?.activeSeconds).toBe(60);
  });
});

describe("a drawing that does not fit is refused with the shape named, and changes nothing", () => {
  const rope = () => classId(db, market.batchId, "rope");
  const base = () => drawing(bottle, bottles());
  const second = (change: Partial<DeskDocument["instances"][number]>): DeskDocument => {
    const document = base();
    const [first, other, ...rest] = document.instances;
    if (!first || !other) throw new Error("three bottles were drawn");
    return { ...document, instances: [first, { ...other, ...change }, ...rest] };
  };
  const outline = (...ring: [number, number][]) => ({ kind: "polygon" as const, rings: [ring] });

  it.each<[string, RegExp, () => DeskDocument]>([
    ["a class of no key", /class is not in the key/, () => second({ classId: "cls_none" })],
    [
      "a class of another batch",
      /class is not in the key/,
      () => second({ classId: classId(db, draftBatch(db, market.owner, market.teamId), "bottle") }),
    ],
    ["a box where the key wants an outline", /wants an outline/, () => second({ classId: rope() })],
    [
      "a box off the left edge",
      /leaves the image/,
      () => second({ shape: { kind: "box", box: [-5, 9, 20, 20] } }),
    ],
    [
      "a box off the bottom",
      /leaves the image/,
      () => second({ shape: { kind: "box", box: [9, 470, 20, 20] } }),
    ],
    [
      "an outline off the right edge",
      /leaves the image/,
      () => second({ classId: rope(), shape: outline([600, 10], [650, 10], [620, 60]) }),
    ],
    ["two shapes of one id", /same id/, () => second({ id: "shape-1" })],
    [
      "an outline without area",
      /no area/,
      () => second({ classId: rope(), shape: outline([10, 10], [50, 50], [90, 90]) }),
    ],
  ])("%s", (_what, why, make) => {
    const document = make();
    let caught: unknown;
    try {
      submit(document);
    } catch (error) {
      caught = error;
    }
    if (!(caught instanceof AppError)) throw new Error("the drawing was taken", { cause: caught });
    expect(caught.code).toBe("invalid");
    expect(caught.message).toMatch(/^Shape 2: /);
    expect(caught.message).toMatch(why);
    expect(Object.keys(caught.fields)).toEqual(["document/instances/1"]);
    expect(all()).toEqual([]);
    expect(db.select().from(claims).get()?.status).toBe("live");
  });

  it("but shapes that end on the edge are inside", () => {
    const edge = second({ shape: { kind: "box", box: [540, 380, 100, 100] } });
    expect(submit(edge).submissionId).toMatch(/^sub_/);
  });
});
