import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { ledgerViolations } from "@/db/queries/ledger";
import { batches, briefVersions, classes, images } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { saveQualityAndPay, setAgreementTarget } from "@/lib/market/batches/editBatch";
import { publishBatch, setPaused } from "@/lib/market/batches/publishBatch";
import { freshDb } from "@/tests/support/db";
import {
  cents,
  draftBatch,
  holdOf,
  image,
  imagesOf,
  join,
  person,
  publish,
  PAY,
  refusalOf,
  refusalText,
  START_MS,
  statusOf,
  team,
  versionOf,
} from "@/tests/support/market";

let db: Db;
let owner: Actor;
let teamId: string;
let batchId: string;
beforeEach(() => {
  db = freshDb();
  owner = person(db, "requester");
  teamId = team(db, owner, 10_000);
  batchId = draftBatch(db, owner, teamId, { imageCount: 4, kMin: 2, kMax: 3 });
});

const unchanged = () => {
  expect(statusOf(db, batchId)).toBe("draft");
  expect(cents(db, "wallet", teamId)).toBe(10_000);
  expect(cents(db, "escrow", batchId)).toBe(0);
  expect(imagesOf(db, batchId).every((row) => row.slotsWanted === 0)).toBe(true);
};

describe("funding a batch", () => {
  it("holds the quoted worst case in escrow and opens the batch", () => {
    publish(db, owner, batchId);
    // 4 images x 3 people x (40 cents + 6 cents of fee)
    expect(cents(db, "escrow", batchId)).toBe(552);
    expect(cents(db, "wallet", teamId)).toBe(10_000 - 552);
    expect(statusOf(db, batchId)).toBe("open");
    expect(imagesOf(db, batchId).map((row) => row.slotsWanted)).toEqual([2, 2, 2, 2]);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("is done once: the second click is a conflict and holds nothing more", () => {
    publish(db, owner, batchId);
    expect(refusalOf(() => publish(db, owner, batchId))).toBe("conflict");
    expect(cents(db, "escrow", batchId)).toBe(552);
  });

  it("refuses a page that is older than the batch", () => {
    const versionSeen = versionOf(db, batchId);
    setAgreementTarget({ actor: owner, nowMs: START_MS, batchId, target: 0.8 });
    const worstCentsSeen = holdOf(db, batchId);
    const attempt = () =>
      publishBatch({ actor: owner, nowMs: START_MS, batchId, versionSeen, worstCentsSeen });
    expect(refusalText(attempt)).toMatch(/changed since you opened/);
    unchanged();
  });

  it("refuses when the cost is no longer the one that was shown", () => {
    const versionSeen = versionOf(db, batchId);
    const worstCentsSeen = holdOf(db, batchId);
    image(db, batchId, { ordinal: 9 }); // one more picture finished its check
    const attempt = () =>
      publishBatch({ actor: owner, nowMs: START_MS, batchId, versionSeen, worstCentsSeen });
    expect(refusalText(attempt)).toMatch(/cost changed/);
    unchanged();
  });

  it("refuses when the wallet lacks a cent, and takes exactly enough", () => {
    const poor = team(db, owner, 551);
    const tooDear = draftBatch(db, owner, poor, { imageCount: 4, kMin: 2, kMax: 3 });
    expect(refusalText(() => publish(db, owner, tooDear))).toMatch(/wallet does not hold enough/);
    expect([cents(db, "wallet", poor), statusOf(db, tooDear)]).toEqual([551, "draft"]);
    const exact = team(db, owner, 552);
    const fits = draftBatch(db, owner, exact, { imageCount: 4, kMin: 2, kMax: 3 });
    publish(db, owner, fits);
    expect([cents(db, "wallet", exact), statusOf(db, fits)]).toEqual([0, "open"]);
  });

  it.each<[string, RegExp, () => void]>([
    ["without pictures", /at least one picture/, () => db.delete(images).run()],
    ["while a picture is checked", /still on the way/, () => void image(db, batchId, { status: "checking" })],
    ["while a picture is awaited", /still on the way/, () => void image(db, batchId, { status: "awaiting" })],
    ["without a class", /at least one class/, () => db.delete(classes).run()],
    ["without a brief", /brief/, () => db.delete(briefVersions).run()],
    [
      "without pay",
      /pay above zero/,
      () => db.update(batches).set({ baseCents: 0, boxCents: 0, polygonCents: 0 }).run(),
    ],
  ])("is refused %s", (_what, why, spoil) => {
    spoil();
    expect(refusalText(() => publish(db, owner, batchId))).toMatch(why);
    unchanged();
  });

  it("holds nothing for a refused picture, which nobody will draw", () => {
    image(db, batchId, { status: "refused", refusal: "Not a picture.", ordinal: 9 });
    publish(db, owner, batchId);
    expect(cents(db, "escrow", batchId)).toBe(552);
    expect(imagesOf(db, batchId).at(-1)?.slotsWanted).toBe(0);
  });

  it("takes an editor or owner of the team: a viewer is forbidden, an outsider finds nothing", () => {
    const viewer = person(db, "requester");
    const editor = person(db, "requester");
    join(db, teamId, viewer, "viewer");
    join(db, teamId, editor, "editor");
    expect(refusalOf(() => publish(db, viewer, batchId))).toBe("forbidden");
    expect(refusalOf(() => publish(db, person(db, "requester"), batchId))).toBe("not_found");
    expect(refusalOf(() => publish(db, person(db, "admin"), batchId))).toBe("not_found");
    unchanged();
    publish(db, editor, batchId);
    expect(statusOf(db, batchId)).toBe("open");
  });

  it("fixes the pay: it cannot be changed afterwards", () => {
    publish(db, owner, batchId);
    const input = {
      ...PAY,
      kMin: 2,
      kMax: 3,
      agreementTarget: 0.7,
      expectedInstances: 3,
      floorHourlyCents: 0,
    };
    const attempt = () =>
      saveQualityAndPay({
        actor: owner,
        nowMs: START_MS,
        batchId,
        input: { ...input, capCents: 100, versionSeen: versionOf(db, batchId) },
      });
    expect(refusalOf(attempt)).toBe("conflict");
    expect(db.select().from(batches).where(eq(batches.id, batchId)).get()?.capCents).toBe(40);
  });
});

describe("pausing", () => {
  it("stops and goes on, and a second click is a conflict", () => {
    publish(db, owner, batchId);
    setPaused({ actor: owner, nowMs: START_MS, batchId, paused: true });
    expect(statusOf(db, batchId)).toBe("paused");
    expect(refusalOf(() => setPaused({ actor: owner, nowMs: START_MS, batchId, paused: true }))).toBe(
      "conflict",
    );
    setPaused({ actor: owner, nowMs: START_MS, batchId, paused: false });
    expect(statusOf(db, batchId)).toBe("open");
  });

  it("of a draft is a conflict", () => {
    expect(refusalOf(() => setPaused({ actor: owner, nowMs: START_MS, batchId, paused: true }))).toBe(
      "conflict",
    );
  });
});
