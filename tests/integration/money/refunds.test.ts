import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { ledgerViolations, listOpenAlerts } from "@/db/queries/ledger";
import { listRefundsOf } from "@/db/queries/payments";
import { refunds } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { reconcile } from "@/lib/market/money/reconcile";
import { refundWallet, runRefund } from "@/lib/market/money/refunds";
import { cents, join, letters, person, refusalOf } from "@/tests/support/market";
import { Bank } from "./bank";

let bank: Bank;
let owner: Actor;
let teamId: string;

beforeAll(async () => void (bank = await Bank.open()));
afterAll(() => bank.close());
beforeEach(async () => {
  await bank.reset();
  ({ owner, teamId } = await bank.wealthy(10_000));
});

const wallet = () => cents(bank.db, "wallet", teamId);
const refunding = () => cents(bank.db, "refunding", teamId);
const rows = () => listRefundsOf(bank.db, teamId);
const ask = (amountCents: number, actor = owner) =>
  refundWallet({ actor, nowMs: Date.now(), teamId, amountCents });
const made = () => [...bank.service.world.refunds.values()];
const HOUR_MS = 3_600_000;

async function expectAgreement(): Promise<void> {
  expect(ledgerViolations(bank.db)).toEqual([]);
  const result = await reconcile({ nowMs: Date.now() + HOUR_MS });
  expect(result).toMatchObject({ suspended: 0, waiting: 0, violations: [] });
  expect(result.ledgerCents).toBe(await bank.balanceCents());
}

/** Money of another team, so that Stripe's balance covers a refund of all of this one's. */
const cushion = () => bank.wealthy(5000);

describe("a refund of the wallet", () => {
  it("goes back to the card, once, and is kept apart until Stripe has booked it", async () => {
    ask(4000);
    expect([wallet(), refunding()]).toEqual([6000, 4000]);
    expect(await bank.quiet()).toEqual([]);
    expect([wallet(), refunding()]).toEqual([6000, 0]);
    expect(rows()).toMatchObject([{ status: "sent", amountCents: 4000 }]);
    expect(made()).toMatchObject([{ amount: 4000, status: "succeeded" }]);
    await expectAgreement();
  });

  it("spans several payments, the latest first, each up to what is left of it", async () => {
    const session = await bank.checkout(owner, teamId, 3000);
    await bank.pay(session);
    await bank.quiet();
    await cushion();
    ask(8000);
    await bank.quiet();
    expect(
      rows()
        .map((row) => row.amountCents)
        .sort(),
    ).toEqual([3000, 5000]);
    expect(wallet()).toBe(5000);
    await expectAgreement();
  });

  it("is for the owner, of no more than the wallet holds, and of whole cents", () => {
    const editor = person(bank.db, "requester");
    join(bank.db, teamId, editor, "editor");
    expect(refusalOf(() => ask(100, editor))).toBe("forbidden");
    expect(refusalOf(() => ask(100, person(bank.db, "requester")))).toBe("not_found");
    expect(refusalOf(() => ask(10_001))).toBe("conflict");
    expect(refusalOf(() => ask(0))).toBe("invalid");
    expect(refusalOf(() => ask(1.5))).toBe("invalid");
    expect(rows()).toEqual([]);
  });

  it("of more than is left of the card payments is refused whole", async () => {
    bank.db
      .update((await import("@/db/schema")).topUps)
      .set({ status: "disputed" })
      .run();
    expect(refusalOf(() => ask(100))).toBe("conflict");
    expect([wallet(), rows().length]).toEqual([10_000, 0]);
  });

  it("whose answer is lost is made once", async () => {
    ask(4000);
    await bank.control("fault", { match: "POST /v1/refunds", when: "after", action: "drop", times: 3 });
    const refundId = rows()[0]?.id ?? "";
    await expect(runRefund({ refundId, nowMs: Date.now() })).rejects.toThrow();
    expect(rows()).toMatchObject([{ status: "queued" }]);
    await bank.control("clock", { advanceMs: 30 * HOUR_MS }); // the key is forgotten
    await runRefund({ refundId, nowMs: Date.now() });
    expect(rows()).toMatchObject([{ status: "sent" }]);
    expect(made()).toHaveLength(1);
    await expectAgreement();
  });

  it("that Stripe refuses is in the wallet again", async () => {
    const annotator = await bank.earner(teamId, 9000);
    bank.askPayout(annotator);
    await bank.quiet();
    ask(1000); // the wallet has it, but Stripe's balance lacks its fee
    await bank.quiet();
    expect(rows()).toMatchObject([{ status: "failed" }]);
    expect([wallet(), refunding()]).toEqual([1000, 0]);
    expect(bank.topUpRows()).toMatchObject([{ refundedCents: 0 }]);
    const told = letters(bank.db, "refund");
    expect(told).toMatchObject([{ to: owner.email, subject: "A refund did not go through" }]);
    expect(told[0]?.text).toContain("$10.00");
    await expectAgreement();
  });

  it("that the card's bank sends back days later is in the wallet again, and can be asked for anew", async () => {
    await bank.reset();
    ({ owner, teamId } = await bank.wealthy(10_000, "4000000000005126"));
    ask(4000);
    await bank.quiet();
    expect(made()).toMatchObject([{ status: "failed" }]);
    expect(rows()).toMatchObject([{ status: "failed" }]);
    expect(wallet()).toBe(10_000);
    await bank.control("webhooks/resend");
    await bank.quiet();
    expect(wallet()).toBe(10_000);
    expect(letters(bank.db, "refund")).toMatchObject([{ to: owner.email, subject: "A refund came back" }]);
    await expectAgreement();
  });

  it("that nobody asked for here goes to suspense with an alert", async () => {
    const { createRefund } = await import("@/fakes/stripe/payments");
    const { Params } = await import("@/fakes/stripe/form");
    const { PLATFORM } = await import("@/fakes/stripe/world");
    const intent = bank.topUpRows()[0]?.stripePaymentIntentId ?? "";
    createRefund(bank.service.world, new Params({ payment_intent: intent, amount: "700" }), PLATFORM);
    await bank.quiet();
    const result = await reconcile({ nowMs: Date.now() + HOUR_MS });
    expect(result).toMatchObject({ suspended: 1, violations: [] });
    expect(cents(bank.db, "suspense")).toBe(-700);
    expect(result.ledgerCents).toBe(await bank.balanceCents());
    expect(listOpenAlerts(bank.db).map((alert) => alert.what)).toContain("suspense");
    await reconcile({ nowMs: Date.now() + 2 * HOUR_MS });
    expect(cents(bank.db, "suspense")).toBe(-700); // once
    expect(bank.db.select().from(refunds).all()).toEqual([]);
  });

  it("and a batch that is funded at the same moment never spend the same cent", async () => {
    ask(10_000);
    expect(refusalOf(() => bank.earn(person(bank.db, "annotator"), teamId, 1))).toBe("conflict");
    expect([wallet(), refunding()]).toEqual([0, 10_000]);
  });
});
