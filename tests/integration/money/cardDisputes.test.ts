import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { ledgerViolations, listOpenAlerts } from "@/db/queries/ledger";
import { ledgerPostings } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { reconcile } from "@/lib/market/money/reconcile";
import { refundWallet } from "@/lib/market/money/refunds";
import { cents, person, refusalOf } from "@/tests/support/market";
import { Bank } from "./bank";

let bank: Bank;
let owner: Actor;
let teamId: string;

beforeAll(async () => void (bank = await Bank.open()));
afterAll(() => bank.close());
beforeEach(async () => {
  await bank.reset();
  await bank.wealthy(50_000); // another team's money, so that Stripe's balance covers everything
  ({ owner, teamId } = await bank.wealthy(10_000));
});

const wallet = () => cents(bank.db, "wallet", teamId);
const charge = () => bank.topUpRows().find((row) => row.teamId === teamId)?.stripeChargeId ?? "";
const status = () => bank.topUpRows().find((row) => row.teamId === teamId)?.status;
const open = async () => String((await bank.control("dispute", { charge: charge() })).id);
const close = (id: string, outcome: string) => bank.control("dispute", { id, outcome });

async function expectAgreement(): Promise<void> {
  expect(ledgerViolations(bank.db)).toEqual([]);
  const result = await reconcile({ nowMs: Date.now() + 3_600_000 });
  expect(result).toMatchObject({ suspended: 0, waiting: 0, violations: [] });
  expect(result.ledgerCents).toBe(await bank.balanceCents());
}

describe("a card dispute", () => {
  it("freezes what the wallet has of it, and a lost one takes that", async () => {
    const id = await open();
    await bank.quiet();
    expect([wallet(), cents(bank.db, "hold", id)]).toEqual([0, 0]); // 100.00 held, 100.00 taken
    expect(status()).toBe("disputed");
    expect(listOpenAlerts(bank.db).map((alert) => alert.what)).toEqual(["card dispute"]);
    await expectAgreement();
    await close(id, "lost");
    await bank.quiet();
    expect([wallet(), cents(bank.db, "hold", id), cents(bank.db, "loss")]).toEqual([0, 0, 0]);
    await expectAgreement();
  });

  it("that is won gives it back", async () => {
    const id = await open();
    await bank.quiet();
    await close(id, "won");
    await bank.control("webhooks/resend");
    await bank.quiet();
    expect([wallet(), cents(bank.db, "hold", id), cents(bank.db, "loss")]).toEqual([10_000, 0, 0]);
    expect(status()).toBe("paid");
    await expectAgreement();
  });

  it("that is heard of only once it is won holds nothing and alarms nobody", async () => {
    const id = await open();
    await close(id, "won");
    await bank.quiet();
    const kinds = bank.db
      .select()
      .from(ledgerPostings)
      .all()
      .map((row) => row.kind);
    expect(kinds.filter((kind) => kind === "dispute")).toHaveLength(2);
    expect(kinds).not.toContain("dispute-freeze");
    expect(listOpenAlerts(bank.db)).toEqual([]);
    expect([wallet(), status()]).toEqual([10_000, "paid"]);
    await expectAgreement();
  });

  it("of money that was spent is the platform's loss, and never touches an annotator", async () => {
    const annotator = person(bank.db, "annotator");
    bank.earn(annotator, teamId, 7000);
    const id = await open();
    await bank.quiet();
    expect([wallet(), cents(bank.db, "hold", id)]).toEqual([0, -7000]);
    await expectAgreement();
    await close(id, "lost");
    await bank.quiet();
    expect([cents(bank.db, "hold", id), cents(bank.db, "loss")]).toEqual([0, -7000]);
    expect([cents(bank.db, "payable", annotator.id), cents(bank.db, "debt", annotator.id)]).toEqual([
      7000, 0,
    ]);
    await expectAgreement();
  });

  it("of money that was spent and that is won costs nothing but Stripe's fee", async () => {
    bank.earn(person(bank.db, "annotator"), teamId, 7000);
    const feesBefore = cents(bank.db, "processing");
    const id = await open();
    await bank.quiet();
    await close(id, "won");
    await bank.quiet();
    expect([wallet(), cents(bank.db, "hold", id), cents(bank.db, "loss")]).toEqual([3000, 0, 0]);
    expect(cents(bank.db, "processing")).toBe(feesBefore - 1500);
    await expectAgreement();
  });

  it("comes to the same whatever the order of its events", async () => {
    await bank.control("webhooks", { shuffle: true, duplicate: 50 });
    for (const outcome of ["won", "lost", "won", "lost"]) {
      await bank.reset();
      await bank.wealthy(50_000);
      ({ owner, teamId } = await bank.wealthy(10_000));
      await bank.control("webhooks", { shuffle: true, duplicate: 50 });
      const id = await open();
      await close(id, outcome); // nothing was delivered between the two
      await bank.quiet(3_600_000);
      expect([wallet(), cents(bank.db, "hold", id)]).toEqual([outcome === "won" ? 10_000 : 0, 0]);
      await expectAgreement();
    }
  });

  it("that is heard of before its payment waits for nothing and finds it", async () => {
    await bank.reset();
    await bank.wealthy(50_000);
    ({ owner, teamId } = bank.payer());
    const session = await bank.checkout(owner, teamId, 10_000);
    await bank.control("webhooks", { shuffle: true });
    await bank.pay(session, "4000000000000259"); // disputed at once
    await bank.quiet();
    expect([wallet(), status()]).toEqual([0, "disputed"]);
    await expectAgreement();
  });

  it("keeps the payment from being refunded", async () => {
    await open();
    await bank.quiet();
    expect(refusalOf(() => refundWallet({ actor: owner, nowMs: Date.now(), teamId, amountCents: 100 }))).toBe(
      "conflict",
    );
  });
});
