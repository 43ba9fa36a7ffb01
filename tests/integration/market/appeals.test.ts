import { createHash } from "node:crypto";
import { eq } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { findImage, listClasses } from "@/db/queries/batches";
import { findPosting, ledgerViolations } from "@/db/queries/ledger";
import {
  findDispute,
  findOpenDispute,
  findRun,
  findSubmission,
  listDocket,
  listSimilarDecisions,
  listSubmissionsOf,
} from "@/db/queries/work";
import { disputeEvidence, disputes } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { DecideInput } from "@/lib/contracts/work";
import { saveKeyAndBrief } from "@/lib/market/batches/editBatch";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { appealDecision, mayAppeal } from "@/lib/market/disputes/appeal";
import { brokenPay } from "@/lib/market/disputes/brokenPay";
import { confirmProposal, decideDispute } from "@/lib/market/disputes/decideDispute";
import { findEvidence } from "@/lib/market/disputes/evidence";
import { whyPartial } from "@/lib/market/disputes/impartial";
import { contestImage, contestScore, withdrawDispute } from "@/lib/market/disputes/openDispute";
import { listSteps } from "@/lib/market/disputes/steps";
import { freshDb } from "@/tests/support/db";
import {
  bottles,
  cents,
  classId,
  drawing,
  HOUR_MS,
  join,
  letters,
  MINUTE_MS,
  openMarket,
  person,
  refusalOf,
  refusalText,
  settledImage,
  splitImage,
  START_MS,
  versionOf,
  work,
  type Market,
} from "@/tests/support/market";

const REASON = "The second bottle is a piece of driftwood.";
const NOON_MS = START_MS + 3 * HOUR_MS;
const WINDOW_MS = 72 * HOUR_MS;

let db: Db;
let market: Market;
let imageId: string;
let second: Actor;
let third: Actor;
beforeEach(() => {
  db = freshDb();
  open();
});

function open(options: Parameters<typeof openMarket>[1] = {}): void {
  market = openMarket(db, { imageCount: 1, kMin: 2, kMax: 3, ...options });
  imageId = market.imageIds[0] ?? "";
  second = person(db, "admin");
  third = person(db, "admin");
}

const annotator = (index: number) => market.annotators[index] as Actor;
const keep: DecideInput = { outcome: "keep", reason: REASON };
const redraw = (count: number): DecideInput => ({
  outcome: "redraw",
  document: drawing(classId(db, market.batchId, "bottle"), bottles().slice(0, count)),
  reason: REASON,
});
const broken = (fault: "brief" | "picture" | "product"): DecideInput => ({
  outcome: "broken",
  fault,
  reason: REASON,
});
const decide = (disputeId: string, decision: DecideInput, actor = market.admin, nowMs = NOON_MS) =>
  decideDispute({ actor, nowMs, disputeId, decision });
const contest = (submissionId: string, actor = annotator(0), nowMs = NOON_MS) =>
  contestScore({ actor, nowMs, submissionId, reason: REASON, errorKind: "outline" });
const appeal = (disputeId: string, actor: Actor, nowMs = NOON_MS) =>
  appealDecision({ actor, nowMs, disputeId, reason: REASON });
const pays = () => listSubmissionsOf(db, imageId).map((row) => row.payCents);

/** A score contested by the first annotator and decided by the first admin. */
function decided(decision: DecideInput = keep): string {
  const [submissionId] = settledImage(market) as [string];
  const disputeId = contest(submissionId);
  decide(disputeId, decision);
  return disputeId;
}

describe("an appeal", () => {
  it("is open to either side: who contested, and an owner or editor of the team", () => {
    const disputeId = decided();
    expect(mayAppeal(db, findDispute(db, disputeId) as never, annotator(0).id, NOON_MS)).toBe(true);
    expect(mayAppeal(db, findDispute(db, disputeId) as never, market.owner.id, NOON_MS)).toBe(true);
    expect(findDispute(db, appeal(disputeId, market.owner))).toMatchObject({
      appealOf: disputeId,
      kind: "score",
      errorKind: "outline",
      status: "open",
    });
  });

  it("is not found by whom it does not concern: a viewer, an outsider, an annotator whose score was left", () => {
    const disputeId = decided();
    const viewer = person(db, "requester");
    join(db, market.teamId, viewer, "viewer");
    for (const actor of [viewer, person(db, "requester"), annotator(1), annotator(4)])
      expect(refusalOf(() => appeal(disputeId, actor))).toBe("not_found");
  });

  it("is open to every annotator whose score the decision changed", () => {
    const disputeId = decided(redraw(2));
    expect(appeal(disputeId, annotator(1))).toMatch(/^dsp_/);
  });

  it("is over after the window, to the millisecond", () => {
    const disputeId = decided();
    expect(refusalText(() => appeal(disputeId, annotator(0), NOON_MS + WINDOW_MS + 1))).toMatch(/72 hours/);
    expect(appeal(disputeId, annotator(0), NOON_MS + WINDOW_MS)).toMatch(/^dsp_/);
  });

  it("takes a decision, is made once, and can be taken back and made by the other side", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    expect(refusalText(() => appeal(disputeId, annotator(0)))).toMatch(/no decision/);
    decide(disputeId, keep);
    const appealId = appeal(disputeId, annotator(0));
    expect(refusalText(() => appeal(disputeId, market.owner))).toMatch(/appealed already/);
    withdrawDispute({ actor: annotator(0), nowMs: NOON_MS, disputeId: appealId });
    expect(appeal(disputeId, market.owner)).toMatch(/^dsp_/);
  });

  it("goes to another admin, and what that one says is final", () => {
    const disputeId = decided();
    const appealId = appeal(disputeId, annotator(0));
    expect(refusalText(() => decide(appealId, keep, market.admin))).toMatch(/first instance/);
    expect(
      letters(db, "docket")
        .filter((letter) => letter.text.includes("An appeal"))
        .map((l) => l.to),
    ).toEqual([second.email, third.email]);
    decide(appealId, keep, second);
    expect(refusalText(() => appeal(appealId, annotator(0)))).toMatch(/final/);
  });

  it("moves money by postings of its own, linked to the first, and keeps the books right", () => {
    const disputeId = decided(redraw(2));
    expect(pays()).toEqual([11, 11]);
    const appealId = appeal(disputeId, annotator(0));
    expect(pays()).toEqual([11, 11]); // nothing moves until it is decided
    expect(decide(appealId, { outcome: "restore", reason: REASON }, second).movedCents).toBe(6);
    expect(pays()).toEqual([14, 14]);
    const [submissionId] = listSubmissionsOf(db, imageId).map((row) => row.id) as [string];
    const cause = { source: "submission", sourceId: submissionId };
    const release = findPosting(db, { ...cause, kind: "release" });
    for (const id of [disputeId, appealId])
      expect(findPosting(db, { ...cause, kind: `adjust:${id}` })?.linkedTo).toBe(release?.id);
    expect(cents(db, "payable", annotator(0).id)).toBe(14);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("can go back to what was merged; a first instance cannot", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const back: DecideInput = { outcome: "restore", reason: REASON };
    expect(refusalOf(() => decide(disputeId, back))).toBe("invalid");
    decide(disputeId, redraw(1));
    const merged = findDispute(db, disputeId)?.evidence.runId as string;
    decide(appeal(disputeId, market.owner), back, second);
    const current = findRun(db, findImage(db, imageId)?.currentRunId ?? "");
    expect(current?.result.agreed).toEqual(findRun(db, merged)?.result.agreed);
  });

  it("that keeps the decision about a split picture changes nothing", () => {
    const ids = splitImage(market);
    const disputeId = findOpenDispute(db, imageId)?.id ?? "";
    decide(disputeId, { outcome: "pick", submissionId: ids[1] ?? "", reason: REASON });
    const before = [pays(), findImage(db, imageId)?.currentRunId];
    decide(appeal(disputeId, annotator(0)), keep, second);
    expect([pays(), findImage(db, imageId)?.currentRunId]).toEqual(before);
  });

  it("tells the other side when it is made, and both when it is decided", () => {
    const disputeId = decided();
    const appealId = appeal(disputeId, annotator(0));
    const contested = letters(db, "contested").filter((letter) => letter.subject.startsWith("Appealed"));
    expect(contested.map((letter) => letter.to)).toEqual([market.owner.email]);
    const before = letters(db, "decision").length;
    decide(appealId, keep, second);
    const told = letters(db, "decision").slice(before);
    expect(told.map((letter) => letter.to).sort()).toEqual([annotator(0).email, market.owner.email].sort());
    expect(told.every((letter) => letter.text.includes(REASON) && letter.text.includes("final"))).toBe(true);
  });
});

describe("who may decide", () => {
  it("is nobody who drew, contested, belongs to the team, or decided before; everybody else may", () => {
    const disputeId = decided();
    const appealId = appeal(disputeId, annotator(0));
    const dispute = findDispute(db, appealId) as never;
    expect(whyPartial(db, dispute, annotator(0).id)).toMatch(/opened/);
    expect(whyPartial(db, dispute, annotator(1).id)).toMatch(/drew/);
    expect(whyPartial(db, dispute, market.owner.id)).toMatch(/team/);
    expect(whyPartial(db, dispute, market.admin.id)).toMatch(/first instance/);
    expect(whyPartial(db, dispute, second.id)).toBeUndefined();
  });

  it("counts a viewer of the team as a member too", () => {
    const [submissionId] = settledImage(market) as [string];
    join(db, market.teamId, second, "viewer");
    expect(refusalOf(() => decide(contest(submissionId), keep, second))).toBe("forbidden");
  });
});

describe("above the money limit", () => {
  /** Three submissions at a cap of $4 each: $12 at stake, above the limit of $10. */
  function largeDispute(): string {
    open({ pay: { baseCents: 5, boxCents: 3, polygonCents: 6, capCents: 400 } });
    splitImage(market);
    return findOpenDispute(db, imageId)?.id ?? "";
  }
  const proposedAtMs = (disputeId: string) => findDispute(db, disputeId)?.proposedAtMs ?? 0;
  const answer = (
    disputeId: string,
    actor: Actor,
    verdict: "confirm" | "send-back",
    at = proposedAtMs(disputeId),
  ) =>
    confirmProposal({
      actor,
      nowMs: NOON_MS + HOUR_MS,
      disputeId,
      answer:
        verdict === "confirm"
          ? { verdict, proposedAtMs: at }
          : { verdict, proposedAtMs: at, reason: "The rope is missing." },
    });

  it("one admin proposes and nothing moves; another confirms and it takes effect", () => {
    const disputeId = largeDispute();
    expect(decide(disputeId, keep)).toEqual({ state: "proposed", movedCents: 0 });
    expect(pays()).toEqual([null, null, null]);
    expect(findDispute(db, disputeId)).toMatchObject({ status: "open", proposedBy: market.admin.id });
    expect(answer(disputeId, second, "confirm").state).toBe("decided");
    expect(pays().every((pay) => pay !== null)).toBe(true);
    expect(findDispute(db, disputeId)).toMatchObject({
      status: "decided",
      decidedBy: market.admin.id,
      confirmedBy: second.id,
    });
    expect(listSteps(db, disputeId).map(({ step }) => step.kind)).toEqual([
      "opened",
      "proposed",
      "confirmed",
      "decided",
    ]);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("nobody confirms an own proposal, and who took part confirms none", () => {
    const disputeId = largeDispute();
    decide(disputeId, keep);
    expect(refusalText(() => answer(disputeId, market.admin, "confirm"))).toMatch(/You proposed/);
    join(db, market.teamId, second, "viewer");
    expect(refusalOf(() => answer(disputeId, second, "confirm"))).toBe("forbidden");
    expect(findDispute(db, disputeId)?.status).toBe("open");
  });

  it("a proposal that is sent back leaves the dispute open for another one", () => {
    const disputeId = largeDispute();
    decide(disputeId, keep);
    expect(refusalText(() => decide(disputeId, keep, second))).toMatch(/proposal waits/);
    const seen = proposedAtMs(disputeId);
    answer(disputeId, second, "send-back");
    expect(findDispute(db, disputeId)).toMatchObject({ status: "open", proposal: null, proposedBy: null });
    expect(refusalOf(() => answer(disputeId, second, "confirm", seen))).toBe("conflict");
    expect(decide(disputeId, keep, second, NOON_MS + HOUR_MS).state).toBe("proposed");
    // What was read before is not what is confirmed now.
    expect(refusalOf(() => answer(disputeId, market.admin, "confirm", seen))).toBe("conflict");
  });

  it("neither of the two decides the appeal", () => {
    const disputeId = largeDispute();
    decide(disputeId, keep);
    answer(disputeId, second, "confirm");
    const appealId = appeal(disputeId, annotator(0), NOON_MS + 2 * HOUR_MS);
    for (const actor of [market.admin, second])
      expect(refusalOf(() => decide(appealId, keep, actor))).toBe("forbidden");
    expect(decide(appealId, keep, third).state).toBe("proposed");
  });

  it("the target time is 24 hours, below it 48", () => {
    const large = findDispute(db, largeDispute());
    expect((large?.dueAtMs ?? 0) - (large?.openedAtMs ?? 0)).toBe(24 * HOUR_MS);
    open();
    const [submissionId] = settledImage(market) as [string];
    const small = findDispute(db, contest(submissionId));
    expect((small?.dueAtMs ?? 0) - (small?.openedAtMs ?? 0)).toBe(48 * HOUR_MS);
  });
});

describe("the evidence", () => {
  it("holds image, all outlines, runs with settings, brief and timing, and its hash is of its text", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const evidence = findEvidence(db, disputeId);
    expect(evidence?.isIntact).toBe(true);
    expect(
      createHash("sha256")
        .update(evidence?.text ?? "")
        .digest("hex"),
    ).toBe(evidence?.sha256);
    expect(findDispute(db, disputeId)?.evidence.sha256).toBe(evidence?.sha256);
    const { snapshot } = evidence as NonNullable<typeof evidence>;
    expect(snapshot.image).toMatchObject({ id: imageId, uploadSha256: findImage(db, imageId)?.sha256 });
    expect(snapshot.submissions.map((row) => row.document)).toEqual(
      listSubmissionsOf(db, imageId).map((row) => row.document),
    );
    expect(snapshot.submissions[0]?.timing).toEqual({
      claimedAtMs: START_MS,
      submittedAtMs: START_MS + 90_000,
      activeSeconds: 80,
    });
    expect(snapshot.runs).toHaveLength(1);
    expect(snapshot.runs[0]).toMatchObject({ origin: "engine", settings: { kMin: 2, kMax: 3 } });
    expect(snapshot.briefs).toEqual([{ version: 1, markdown: "Draw every bottle and every rope." }]);
  });

  it("cannot be changed or removed, and does not change when brief, run and pay do", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    const before = findEvidence(db, disputeId);
    editBrief("Draw bottles only.");
    decide(disputeId, redraw(1));
    expect(findEvidence(db, disputeId)).toEqual(before);
    const sqlite = db.$client;
    expect(() => sqlite.prepare("update dispute_evidence set snapshot = '{}'").run()).toThrow(/frozen/);
    expect(() => sqlite.prepare("delete from dispute_evidence").run()).toThrow(/frozen/);
  });

  it("that was changed past its protection shows", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    db.$client.exec("drop trigger dispute_evidence_no_update");
    const snapshot = findEvidence(db, disputeId)?.text.replace('"payCents":14', '"payCents":41') ?? "";
    db.update(disputeEvidence).set({ snapshot }).where(eq(disputeEvidence.disputeId, disputeId)).run();
    expect(findEvidence(db, disputeId)?.isIntact).toBe(false);
  });

  it("names the brief that was shown at the claim, not the one of today", () => {
    const first = work(market, annotator(0), bottles());
    editBrief("Draw bottles only.");
    // Later than the first: submissions of one moment come in no stated order.
    work(market, annotator(1), bottles(1), { nowMs: START_MS + 2 * MINUTE_MS });
    settleImage({ imageId, nowMs: START_MS + 5 * MINUTE_MS });
    const dispute = findDispute(db, contest(first));
    expect(dispute?.evidence.briefVersion).toBe(1);
    const snapshot = findEvidence(db, dispute?.id ?? "")?.snapshot;
    expect(snapshot).toMatchObject({ briefVersion: 1, currentBriefVersion: 2 });
    expect(snapshot?.submissions.map((row) => row.briefVersion)).toEqual([1, 2]);
    expect(snapshot?.briefs.map((brief) => brief.version)).toEqual([1, 2]);
  });

  function editBrief(brief: string): void {
    const key = listClasses(db, market.batchId);
    saveKeyAndBrief({
      actor: market.owner,
      nowMs: START_MS + MINUTE_MS,
      batchId: market.batchId,
      input: {
        title: "Wrack line, spring tide",
        classes: key.map(({ id, number, name, colour, pattern, geometry }) => ({
          id,
          number,
          name,
          colour,
          pattern: pattern as "solid",
          geometry,
        })),
        brief,
        examples: [],
        sensitive: false,
        sensitiveNote: "",
        safetyCritical: false,
        versionSeen: versionOf(db, market.batchId),
      },
    });
  }
});

describe("a task that was broken", () => {
  it("counts against nobody: no score, the work paid as drawn, the picture set aside", () => {
    const ids = splitImage(market);
    decide(findOpenDispute(db, imageId)?.id ?? "", broken("brief"));
    expect(pays()).toEqual([11, 11, 11]); // base 5 and two boxes at 3
    expect(ids.map((id) => findSubmission(db, id)?.quality)).toEqual([null, null, null]);
    expect(findImage(db, imageId)?.consensusState).toBe("void");
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("never lowers what was paid", () => {
    const [submissionId] = settledImage(market) as [string];
    decide(contest(submissionId), broken("picture"));
    expect(pays()).toEqual([14, 14]);
  });

  it("pays nobody for having filled the picture: at most the median count of instances", () => {
    const [bottle] = listClasses(db, market.batchId);
    const boxes = (count: number) =>
      drawing(
        bottle?.id ?? "",
        Array.from({ length: count }, (_, index): [number, number, number, number] => [index * 10, 5, 8, 8]),
      );
    const batch = { baseCents: 5, boxCents: 3, polygonCents: 6, capCents: 400, feeBps: 1500 };
    const list = [2, 3, 100].map((count) => ({ document: boxes(count), payCents: null }));
    const paid = brokenPay(batch as never, listClasses(db, market.batchId), list, "brief");
    expect(paid).toEqual([
      { payCents: 11, feeCents: 1 },
      { payCents: 14, feeCents: 2 },
      { payCents: 14, feeCents: 2 },
    ]);
  });

  it("by the product costs the team nothing: no fee, and the pay comes back from the platform, linked", () => {
    splitImage(market);
    const wallet = cents(db, "wallet", market.teamId);
    const disputeId = findOpenDispute(db, imageId)?.id ?? "";
    decide(disputeId, broken("product"));
    expect(cents(db, "fee")).toBe(0);
    expect(cents(db, "wallet", market.teamId)).toBe(wallet + 33);
    expect(cents(db, "shortfall")).toBe(-33);
    // On appeal the first decision falls: what was given goes back.
    decide(appeal(disputeId, market.owner), broken("brief"), second);
    expect(cents(db, "wallet", market.teamId)).toBe(wallet);
    expect(cents(db, "shortfall")).toBe(0);
    const given = findPosting(db, { source: "dispute", sourceId: disputeId, kind: "goodwill" });
    const back = findPosting(db, { source: "dispute", sourceId: disputeId, kind: "goodwill-back" });
    expect(back?.linkedTo).toBe(given?.id);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("is not drawn any more and is in no release, and tells everybody who drew it", () => {
    splitImage(market);
    decide(findOpenDispute(db, imageId)?.id ?? "", broken("picture"));
    expect(refusalOf(() => work(market, annotator(4), bottles(), { nowMs: NOON_MS }))).not.toBe("nothing");
    const told = letters(db, "decision");
    expect(told).toHaveLength(4);
    expect(told[0]?.text).toMatch(/counts against nobody/);
  });
});

describe("the docket", () => {
  it("has overdue ones first, then by money at stake and time waited", () => {
    open({ imageCount: 4 });
    const make = (index: number, openedMs: number, kind: "score" | "image") => {
      const image = market.imageIds[index] ?? "";
      const ids = [0, 1].map((who) =>
        work(market, annotator(who), bottles(who), { imageId: image, nowMs: START_MS + index * HOUR_MS }),
      );
      settleImage({ imageId: image, nowMs: START_MS + index * HOUR_MS + 2 * MINUTE_MS });
      return kind === "score"
        ? contest(ids[0] ?? "", annotator(0), openedMs)
        : contestImage({ actor: market.owner, nowMs: openedMs, imageId: image, reason: REASON });
    };
    const old = make(0, START_MS + 10 * HOUR_MS, "score"); // 26 cents, waits longest
    const large = make(1, START_MS + 40 * HOUR_MS, "image"); // 52 cents
    const fresh = make(2, START_MS + 50 * HOUR_MS, "score"); // 26 cents
    const order = (hours: number) =>
      listDocket(db, "open", START_MS + hours * HOUR_MS).map(({ dispute }) => dispute.id);
    // At hour 51: 26 x 42 h, 52 x 12 h, 26 x 2 h.
    expect(order(51)).toEqual([old, large, fresh]);
    // At hour 100 the first two are overdue, and money puts the large one first: 52 x 61 h against 26 x 91 h.
    expect(order(100)).toEqual([large, old, fresh]);
  });

  it("keeps a decision's earlier ones: same kind of error, class and batch, the most alike first", () => {
    open({ imageCount: 3 });
    const bottle = classId(db, market.batchId, "bottle");
    const rope = classId(db, market.batchId, "rope");
    const make = (index: number, errorKind: "outline" | "class", about: string | null) => {
      const image = market.imageIds[index] ?? "";
      [0, 1].forEach((who) => work(market, annotator(who), bottles(who), { imageId: image }));
      settleImage({ imageId: image, nowMs: START_MS + 2 * MINUTE_MS });
      return contestImage({
        actor: market.owner,
        nowMs: NOON_MS,
        imageId: image,
        reason: REASON,
        errorKind,
        classId: about,
      });
    };
    const alike = make(0, "outline", bottle);
    const other = make(1, "class", rope);
    const now = make(2, "outline", bottle);
    decide(alike, keep);
    decide(other, keep);
    const similar = listSimilarDecisions(db, findDispute(db, now) as never, 8);
    expect(similar.map(({ dispute, alike: same }) => [dispute.id, same])).toEqual([
      [alike, ["error", "class", "batch"]],
      [other, ["batch"]],
    ]);
    decide(now, { ...keep, citedIds: [alike] });
    expect(findDispute(db, now)?.citedIds).toEqual([alike]);
    expect(letters(db, "decision").at(-1)?.text).toMatch(/follows 1 earlier decision/);
  });

  it("refuses to cite what is no decision", () => {
    const [submissionId] = settledImage(market) as [string];
    const disputeId = contest(submissionId);
    for (const id of [disputeId, "dsp_nothing"])
      expect(refusalOf(() => decide(disputeId, { ...keep, citedIds: [id] }))).toBe("invalid");
  });

  it("refuses a class that the key does not have", () => {
    const [submissionId] = settledImage(market) as [string];
    const about = { actor: annotator(0), nowMs: NOON_MS, submissionId, reason: REASON, classId: "cls_none" };
    expect(refusalOf(() => contestScore(about))).toBe("invalid");
    expect(db.select().from(disputes).all()).toEqual([]);
  });
});
