import { eq } from "drizzle-orm";
import Stripe from "stripe";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { POST } from "@/app/api/stripe/webhook/route";
import { ledgerViolations, listOpenAlerts, trialBalance } from "@/db/queries/ledger";
import { ledgerPostings } from "@/db/schema";
import { reconcile } from "@/lib/market/money/reconcile";
import { startTopUp } from "@/lib/market/money/topUp";
import { receiveStripeEvent } from "@/lib/market/money/stripeEvents";
import { cents, join, person } from "@/tests/support/market";
import { Bank, WEBHOOK_SECRET } from "./bank";

let bank: Bank;
beforeAll(async () => void (bank = await Bank.open()));
beforeEach(() => bank.reset());
afterAll(() => bank.close());

const walletOf = (teamId: string) => cents(bank.db, "wallet", teamId);
const postings = () => bank.db.select().from(ledgerPostings).all();

/** What must hold after each of these histories: the ledger with itself, and with Stripe to the cent. */
async function expectAgreement(): Promise<void> {
  expect(ledgerViolations(bank.db)).toEqual([]);
  const result = await reconcile({ nowMs: Date.now() + 3_600_000 });
  expect(result).toMatchObject({ suspended: 0, waiting: 0, violations: [] });
  expect(result.ledgerCents).toBe(result.stripeCents);
  expect(result.ledgerCents).toBe(await bank.balanceCents());
}

describe("a card payment", () => {
  it("credits the wallet whole, with Stripe's fee as the platform's cost", async () => {
    const { owner, teamId } = bank.payer();
    const session = await bank.checkout(owner, teamId, 10_000);
    expect(walletOf(teamId)).toBe(0);
    await bank.pay(session);
    expect(walletOf(teamId)).toBe(0); // the browser coming back credits nothing
    expect(await bank.quiet()).toEqual([]);
    expect(walletOf(teamId)).toBe(10_000);
    // 2.9 % and 30 cents (Stripe's published price for cards in the United States).
    expect(cents(bank.db, "processing")).toBe(-320);
    expect(bank.topUpRows()).toMatchObject([{ status: "paid", amountCents: 10_000 }]);
    await expectAgreement();
  });

  it("is charged once when every webhook comes twice and in any order", async () => {
    await bank.control("webhooks", { duplicate: 100, shuffle: true });
    const { teamId } = await bank.wealthy(5000);
    await bank.control("webhooks/resend");
    await bank.quiet();
    expect(walletOf(teamId)).toBe(5000);
    expect(postings().filter((row) => row.kind === "topup")).toHaveLength(1);
    await expectAgreement();
  });

  it("is credited when only one of its events arrives, whichever it is", async () => {
    for (const type of ["charge.succeeded", "checkout.session.completed"]) {
      await bank.reset();
      const { owner, teamId } = bank.payer();
      await bank.pay(await bank.checkout(owner, teamId, 5000));
      const event = [...bank.service.world.events.values()].find((row) => row.type === type);
      const body = JSON.stringify(bank.service.world.render(event));
      expect((await deliver(body, sign(body))).status).toBe(200);
      await bank.work();
      expect(walletOf(teamId)).toBe(5000);
    }
  });

  it("that is declined credits nothing and can be tried with another card", async () => {
    const { owner, teamId } = bank.payer();
    const session = await bank.checkout(owner, teamId, 5000);
    await expect(bank.pay(session, "4000000000000002")).rejects.toThrow("declined");
    await bank.quiet();
    expect(walletOf(teamId)).toBe(0);
    expect(bank.topUpRows()).toMatchObject([{ status: "open" }]);
    await bank.pay(session);
    await bank.quiet();
    expect(walletOf(teamId)).toBe(5000);
    await expectAgreement();
  });

  it("whose session expires is noted as expired and takes no money", async () => {
    const { owner, teamId } = bank.payer();
    const session = await bank.checkout(owner, teamId, 5000);
    await bank.control("expire-session", { id: session });
    await bank.quiet();
    expect(bank.topUpRows()).toMatchObject([{ status: "expired" }]);
    expect(walletOf(teamId)).toBe(0);
  });

  it("that is not yet available at Stripe is booked as pending, and moved when it is", async () => {
    await bank.control("settings", { settleMs: 2 * 86_400_000 });
    const { teamId } = await bank.wealthy(5000);
    expect(walletOf(teamId)).toBe(5000);
    const before = await reconcile({ nowMs: Date.now() });
    expect(before).toMatchObject({ ledgerPendingCents: 4825, stripePendingCents: 4825 });
    await bank.control("clock", { advanceMs: 3 * 86_400_000 });
    const after = await reconcile({ nowMs: Date.now() });
    expect(after).toMatchObject({ ledgerPendingCents: 0, stripePendingCents: 0, ledgerCents: 4825 });
    await reconcile({ nowMs: Date.now() });
    expect(postings().filter((row) => row.kind === "available")).toHaveLength(1);
    expect(listOpenAlerts(bank.db)).toEqual([]);
    expect(ledgerViolations(bank.db)).toEqual([]);
  });

  it("survives an answer that is lost: the session is made once", async () => {
    const { owner, teamId } = bank.payer();
    await bank.control("fault", { match: "POST /v1/checkout", when: "after", action: "drop", times: 1 });
    const session = await bank.checkout(owner, teamId, 5000);
    expect([...bank.service.world.sessions.values()].map((row) => row.id)).toEqual([session]);
  });

  it("is for owners and editors, between the bounds, and comes back to our own pages", async () => {
    const { owner, teamId } = bank.payer();
    const viewer = person(bank.db, "requester");
    join(bank.db, teamId, viewer, "viewer");
    const ask = (more: object) =>
      startTopUp({ actor: owner, nowMs: 0, teamId, amountCents: 5000, returnPath: "/wallet", ...more });
    await expect(ask({ actor: viewer })).rejects.toMatchObject({ code: "forbidden" });
    await expect(ask({ actor: person(bank.db, "requester") })).rejects.toMatchObject({ code: "not_found" });
    for (const amountCents of [49, 5_000_001, 60.5, Number.NaN])
      await expect(ask({ amountCents })).rejects.toMatchObject({ code: "invalid" });
    await expect(ask({ returnPath: "https://elsewhere.example/" })).rejects.toMatchObject({
      code: "invalid",
    });
    expect([...bank.service.world.sessions.values()]).toEqual([]);
  });
});

const signer = new Stripe("sk_test_signer");
const sign = (payload: string, secret = WEBHOOK_SECRET, timestamp = Math.floor(Date.now() / 1000)) =>
  signer.webhooks.generateTestHeaderString({ payload, secret, timestamp });
const deliver = (body: string, signature?: string) =>
  POST(
    new Request("http://127.0.0.1/api/stripe/webhook", {
      method: "POST",
      body,
      headers: signature ? { "stripe-signature": signature } : {},
    }),
  );

describe("the webhook", () => {
  const event = (id: string, object: object, type = "checkout.session.completed") =>
    JSON.stringify({ id, object: "event", type, data: { object } });

  it.each([
    ["no signature", (): string | undefined => undefined],
    ["a signature by another secret", (body: string) => sign(body, "whsec_other")],
    ["a signature of another body", () => sign("{}")],
    ["a signature of ten minutes ago", (body: string) => sign(body, WEBHOOK_SECRET, Date.now() / 1000 - 600)],
  ])("refuses %s and keeps nothing", async (_what, signatureOf) => {
    const body = event("evt_forged", { id: "cs_forged" });
    expect((await deliver(body, signatureOf(body))).status).toBe(403);
    expect(bank.eventRows()).toEqual([]);
    expect(bank.jobRows()).toEqual([]);
  });

  it("refuses a body that is too long before it is read as an event", async () => {
    const body = event("evt_long", { id: "x".repeat(1_100_000) });
    expect((await deliver(body, sign(body))).status).toBe(413);
    expect(bank.eventRows()).toEqual([]);
  });

  it("keeps an event once, with no more of it than its object's id", async () => {
    const body = event("evt_twice", { id: "cs_1", customer_details: { email: "someone@skerrow.example" } });
    for (let n = 0; n < 3; n++) expect((await deliver(body, sign(body))).status).toBe(200);
    expect(bank.eventRows()).toMatchObject([{ payload: { data: { object: { id: "cs_1" } } } }]);
    expect(JSON.stringify(bank.eventRows())).not.toContain("someone@");
    expect(bank.jobRows()).toHaveLength(1);
  });

  it("takes an event about something unknown, and asks again later while Stripe knows nothing of it", async () => {
    const body = event("evt_unknown", { id: "cs_nowhere" });
    receiveStripeEvent({ body, signature: sign(body), nowMs: Date.now() });
    expect(await bank.work()).toMatchObject([{ kind: "stripe.event" }]);
    expect(bank.eventRows()).toMatchObject([{ processedAtMs: null }]);
    expect(postings()).toEqual([]);
  });
});

describe("a payment that belongs to no top-up", () => {
  it("goes to suspense with an alert, and out of it when it is explained", async () => {
    const { owner, teamId } = bank.payer();
    const session = await bank.checkout(owner, teamId, 5000);
    const [row] = bank.topUpRows();
    const hidden = { ...row, id: "pay_hidden" };
    const { topUps } = await import("@/db/schema");
    bank.db
      .update(topUps)
      .set({ id: hidden.id })
      .where(eq(topUps.id, row?.id ?? ""))
      .run();
    await bank.pay(session);
    await bank.quiet();
    expect(cents(bank.db, "suspense")).toBe(4825);
    expect(listOpenAlerts(bank.db).map((alert) => alert.what)).toEqual(["unknown payment"]);
    expect(ledgerViolations(bank.db)).toEqual([]);
    bank.db
      .update(topUps)
      .set({ id: row?.id ?? "" })
      .where(eq(topUps.id, hidden.id))
      .run();
    await expectAgreement();
    expect(cents(bank.db, "suspense")).toBe(0);
    expect(walletOf(teamId)).toBe(5000);
    expect(trialBalance(bank.db).reduce((sum, line) => sum + line.cents, 0)).toBe(0);
  });
});
