import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { ledgerViolations } from "@/db/queries/ledger";
import { listPayoutsOf } from "@/db/queries/payments";
import { payouts, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { earnings } from "@/lib/market/money/queries";
import { requestPayout, runPayout, settlePayout } from "@/lib/market/money/payouts";
import { reconcile } from "@/lib/market/money/reconcile";
import { cents, letters, person, refusalOf } from "@/tests/support/market";
import { Bank } from "./bank";

let bank: Bank;
let teamId: string;
let annotator: Actor;

beforeAll(async () => void (bank = await Bank.open()));
afterAll(() => bank.close());
beforeEach(async () => {
  await bank.reset();
  ({ teamId } = await bank.wealthy(10_000));
  annotator = await bank.earner(teamId, 2500);
});

const payable = () => cents(bank.db, "payable", annotator.id);
const transit = () => cents(bank.db, "transit", annotator.id);
const rows = () => listPayoutsOf(bank.db, annotator.id);
const transfers = () => [...bank.service.world.transfers.values()];
const ask = () => bank.askPayout(annotator);
const run = (payoutId: string) => runPayout({ payoutId, nowMs: Date.now() });
const HOUR_MS = 3_600_000;

async function expectAgreement(): Promise<void> {
  expect(ledgerViolations(bank.db)).toEqual([]);
  const result = await reconcile({ nowMs: Date.now() + HOUR_MS });
  expect(result).toMatchObject({ suspended: 0, waiting: 0, violations: [] });
  expect(result.ledgerCents).toBe(await bank.balanceCents());
  const { accounts } = (await bank.control("audit")) as { accounts: { balance: number; sum: number }[] };
  for (const { balance, sum } of accounts) expect(balance).toBe(sum);
}

describe("a payout", () => {
  it("goes from payable to the bank by one transfer and one payout", async () => {
    ask();
    expect([payable(), transit()]).toEqual([0, 2500]);
    expect(rows()).toMatchObject([{ status: "queued" }]);
    await bank.work();
    expect([payable(), transit()]).toEqual([0, 0]);
    expect(rows()).toMatchObject([{ status: "sent" }]);
    expect(await bank.quiet()).toEqual([]);
    expect(rows()).toMatchObject([{ status: "paid", amountCents: 2500 }]);
    expect(transfers().map((row) => row.amount)).toEqual([2500]);
    expect(letters(bank.db, "payout")).toMatchObject([
      { subject: "Your payout is on its way" },
      { subject: "Your payout arrived" },
    ]);
    expect(earnings(bank.db, annotator.id)).toMatchObject({ payableCents: 0, transitCents: 0, debtCents: 0 });
    await expectAgreement();
  });

  it("can be of a part, from the least amount on, and never of more than there is", async () => {
    const part = (amountCents?: number) =>
      requestPayout({
        actor: annotator,
        nowMs: Date.now(),
        ...(amountCents !== undefined && { amountCents }),
      });
    expect(refusalOf(() => part(99))).toBe("invalid");
    expect(refusalOf(() => part(100.5))).toBe("invalid");
    expect(refusalOf(() => part(2501))).toBe("conflict");
    part(2450);
    expect(payable()).toBe(50);
    expect(refusalOf(() => part())).toBe("conflict"); // less than the least
    await bank.quiet();
    await expectAgreement();
  });

  it("is asked for once: a second click finds nothing left", () => {
    ask();
    expect(refusalOf(ask)).toBe("conflict");
    expect(rows()).toHaveLength(1);
  });

  it("takes a payout account that is ready", async () => {
    const newcomer = person(bank.db, "annotator");
    bank.earn(newcomer, teamId, 500);
    expect(refusalOf(() => bank.askPayout(newcomer))).toBe("conflict");
  });
});

describe("a payout that meets a crash", () => {
  it("after the transfer and before its note is not sent twice", async () => {
    const payoutId = ask();
    // The answer is lost on every try of the SDK: for the product the call failed, at Stripe it was done.
    await bank.control("fault", { match: "POST /v1/transfers", when: "after", action: "drop", times: 3 });
    await expect(run(payoutId)).rejects.toThrow();
    expect(transfers()).toHaveLength(1);
    expect(rows()).toMatchObject([{ status: "queued", stripeTransferId: null }]);
    expect(transit()).toBe(2500);
    await bank.quiet(HOUR_MS);
    expect(rows()).toMatchObject([{ status: "paid" }]);
    expect(transfers()).toHaveLength(1);
    await expectAgreement();
  });

  it("is resumed by the transfer's group when its key was forgotten long ago", async () => {
    const payoutId = ask();
    await bank.control("fault", { match: "POST /v1/transfers", when: "after", action: "drop", times: 3 });
    await expect(run(payoutId)).rejects.toThrow();
    await bank.control("clock", { advanceMs: 3 * 86_400_000 });
    await run(payoutId);
    expect(transfers()).toHaveLength(1);
    expect(rows()).toMatchObject([{ status: "sent" }]);
  });

  it("between transfer and bank goes on where it stopped", async () => {
    const payoutId = ask();
    await bank.control("fault", {
      match: "POST /v1/payouts",
      when: "before",
      action: "status",
      status: 500,
      times: 3,
    });
    await expect(run(payoutId)).rejects.toThrow();
    expect(rows()).toMatchObject([{ status: "sent", stripePayoutId: null }]);
    await bank.quiet(HOUR_MS);
    expect(rows()).toMatchObject([{ status: "paid" }]);
    expect(transfers()).toHaveLength(1);
    await expectAgreement();
  });

  it("of Stripe's own that is replayed is tried until the key is forgotten, and sent once", async () => {
    const payoutId = ask();
    await bank.control("fault", {
      match: "POST /v1/transfers",
      when: "inside",
      action: "status",
      status: 500,
      times: 1,
    });
    await expect(run(payoutId)).rejects.toThrow();
    await expect(run(payoutId)).rejects.toThrow(); // the 500 is kept for a day and replayed
    expect(transfers()).toHaveLength(0);
    expect(transit()).toBe(2500);
    await bank.control("clock", { advanceMs: 25 * HOUR_MS });
    await run(payoutId);
    expect(transfers()).toHaveLength(1);
    await bank.quiet();
    expect(rows()).toMatchObject([{ status: "paid" }]);
    await expectAgreement();
  });

  it("or two workers at once makes one transfer", async () => {
    const payoutId = ask();
    const outcomes = await Promise.allSettled([run(payoutId), run(payoutId), run(payoutId)]);
    expect(outcomes.some((outcome) => outcome.status === "fulfilled")).toBe(true);
    await bank.quiet(HOUR_MS);
    expect(transfers()).toHaveLength(1);
    expect([...bank.service.world.payouts.values()]).toHaveLength(1);
    expect(rows()).toMatchObject([{ status: "paid" }]);
    await expectAgreement();
  });

  it("or a limit on requests waits and goes on", async () => {
    const payoutId = ask();
    await bank.control("fault", {
      match: "POST /v1/transfers",
      when: "before",
      action: "status",
      status: 429,
      times: 1,
    });
    await expect(run(payoutId)).rejects.toThrow();
    expect(transit()).toBe(2500);
    await bank.quiet(HOUR_MS);
    expect(rows()).toMatchObject([{ status: "paid" }]);
    await expectAgreement();
  });
});

describe("a payout that does not arrive", () => {
  it.each([
    ["an account that does not exist", "000111111116"],
    ["an account that was closed", "000111111113"],
  ])("at %s comes back to the payable, with a letter", async (_what, number) => {
    annotator = await bank.earner(teamId, 700, number);
    bank.askPayout(annotator);
    await bank.quiet();
    expect(rows()).toMatchObject([{ status: "failed" }]);
    expect(rows()[0]?.failure).not.toBe("");
    expect(payable()).toBe(700);
    expect(letters(bank.db, "payout")).toMatchObject([
      { subject: "Your payout is on its way" },
      { subject: "Your payout came back" },
    ]);
    await expectAgreement();
  });

  it("after it was reported as paid comes back too, once", async () => {
    ask();
    await bank.quiet();
    const id = rows()[0]?.stripePayoutId ?? "";
    expect(rows()).toMatchObject([{ status: "paid" }]);
    await bank.control("payout", { id, outcome: "failed" });
    await bank.control("webhooks/resend");
    await bank.quiet();
    expect(rows()).toMatchObject([{ status: "failed" }]);
    expect(payable()).toBe(2500);
    expect(transfers()).toMatchObject([{ amount_reversed: 2500 }]);
    await expectAgreement();
    ask(); // and can be asked for again
    await bank.quiet();
    expect(
      rows()
        .map((row) => row.status)
        .sort(),
    ).toEqual(["failed", "paid"]);
    await expectAgreement();
  });

  it("whose return meets a crash is fetched home once", async () => {
    annotator = await bank.earner(teamId, 700, "000111111116");
    bank.askPayout(annotator);
    await bank.work();
    await bank.control("fault", { match: "POST /v1/transfers/", when: "after", action: "drop", times: 3 });
    await bank.service.settle();
    expect(await bank.work()).not.toEqual([]);
    await bank.quiet(HOUR_MS);
    expect(rows()).toMatchObject([{ status: "failed" }]);
    expect(payable()).toBe(700);
    await expectAgreement();
  });

  it("because Stripe refuses the transfer is void, and nothing moved", async () => {
    await bank.control("account", { account: bank.accountOf(annotator), state: "restricted" });
    await bank.service.settle();
    ask();
    await bank.work();
    expect(rows()).toMatchObject([{ status: "failed", failure: "Stripe refused the transfer." }]);
    expect([payable(), transit()]).toEqual([2500, 0]);
    expect(transfers()).toEqual([]);
    await bank.quiet();
    await expectAgreement();
  });

  it("when an admin takes the transfer back at Stripe is payable again", async () => {
    const payoutId = ask();
    await bank.control("fault", {
      match: "POST /v1/payouts",
      when: "before",
      action: "status",
      status: 500,
      times: 3,
    });
    await expect(run(payoutId)).rejects.toThrow();
    const [transfer] = transfers();
    const { reverseTransfer } = await import("@/fakes/stripe/connect");
    const { Params } = await import("@/fakes/stripe/form");
    if (transfer) reverseTransfer(bank.service.world, transfer, new Params({ amount: "1000" }));
    await bank.service.settle();
    await bank.work();
    expect(payable()).toBe(1000);
    expect(ledgerViolations(bank.db)).toEqual([]);
    if (transfer) reverseTransfer(bank.service.world, transfer, new Params({}));
    await bank.quiet();
    expect(payable()).toBe(2500);
    expect(rows()).toMatchObject([{ status: "failed" }]);
    await expectAgreement();
  });
});

describe("a payout that Stripe's balance does not cover yet", () => {
  it("waits with its money kept, and is sent under another key when it does", async () => {
    await bank.reset();
    await bank.control("settings", { settleMs: 2 * 86_400_000 });
    ({ teamId } = await bank.wealthy(10_000));
    annotator = await bank.earner(teamId, 2500);
    ask();
    await bank.quiet();
    expect(rows()).toMatchObject([{ status: "queued", attempt: 2 }]);
    expect(transit()).toBe(2500);
    await bank.control("clock", { advanceMs: 3 * 86_400_000 });
    await bank.quiet(2 * HOUR_MS);
    expect(rows()).toMatchObject([{ status: "paid" }]);
    const keys = (await bank.requests("POST", "/v1/transfers")).map((request) => request.key);
    expect(new Set(keys).size).toBe(2);
    expect(transfers()).toHaveLength(1);
    await expectAgreement();
  });
});

describe("a payout's webhook", () => {
  it("about a payout of nobody here raises an alert and changes nothing", async () => {
    ask();
    await bank.quiet();
    const [row] = rows();
    const stranger = bank.service.world.payouts.find(row?.stripePayoutId ?? "");
    bank.db.update(payouts).set({ stripePayoutId: null, id: "out_other" }).run();
    expect(stranger?.status).toBe("paid");
    await settlePayout(row?.stripePayoutId ?? "", bank.accountOf(annotator), Date.now());
    expect(payable()).toBe(0);
  });

  it("notes whether the account can be paid, and stops payouts when it cannot", async () => {
    await bank.control("account", { account: bank.accountOf(annotator), state: "restricted" });
    await bank.quiet();
    const ready = () =>
      bank.db
        .select()
        .from(users)
        .all()
        .find((row) => row.id === annotator.id)?.payoutsEnabled;
    expect(ready()).toBe(false);
    expect(refusalOf(ask)).toBe("conflict");
    await bank.control("account", { account: bank.accountOf(annotator), state: "active" });
    await bank.quiet();
    expect(ready()).toBe(true);
  });
});
