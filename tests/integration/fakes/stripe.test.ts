import { createServer, type Server } from "node:http";
import type { AddressInfo } from "node:net";
import Stripe from "stripe";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import {
  WEBHOOK_SECRET,
  clientsOf,
  control,
  eventually,
  startTestFakes,
  type TestFakes,
} from "@/tests/support/fakes";

const DAYS_MS = 86_400_000;

type Hook = {
  events: { id: string; type: string; account?: string | undefined }[];
  signatures: string[];
  answer: number;
  url: string;
  server: Server;
};

let fakes: TestFakes;
let stripe: Stripe;
let hook: Hook;

/** An endpoint that verifies what it is sent with the SDK, as the product does. */
async function startHook(): Promise<Hook> {
  const verifier = new Stripe("sk_test_verify");
  const server = createServer(async (request, response) => {
    const chunks: Buffer[] = [];
    for await (const chunk of request as AsyncIterable<Buffer>) chunks.push(chunk);
    const signature = String(request.headers["stripe-signature"]);
    try {
      const event = verifier.webhooks.constructEvent(Buffer.concat(chunks), signature, WEBHOOK_SECRET);
      if (hook.answer === 200) hook.events.push({ id: event.id, type: event.type, account: event.account });
      hook.signatures.push(signature);
      response.writeHead(hook.answer).end();
    } catch {
      response.writeHead(400).end();
    }
  });
  await new Promise<void>((resolve) => server.listen(0, "127.0.0.1", resolve));
  return {
    events: [],
    signatures: [],
    answer: 200,
    url: `http://127.0.0.1:${(server.address() as AddressInfo).port}/hook`,
    server,
  };
}

beforeAll(async () => {
  hook = await startHook();
  fakes = await startTestFakes({ stripe: { webhookUrl: hook.url, settleMs: 2 * DAYS_MS } });
  ({ stripe } = clientsOf(fakes));
});
afterAll(async () => {
  hook.server.close();
  await fakes.remove();
});
beforeEach(async () => {
  await control(fakes.stripe, "reset");
  Object.assign(hook, { events: [], signatures: [], answer: 200 });
});

const session = (extra: Partial<Stripe.Checkout.SessionCreateParams> = {}, unit = 5000) =>
  stripe.checkout.sessions.create({
    mode: "payment",
    client_reference_id: "pay_1",
    line_items: [
      { quantity: 1, price_data: { currency: "usd", unit_amount: unit, product_data: { name: "Wallet" } } },
    ],
    metadata: { topUpId: "pay_1" },
    payment_intent_data: { metadata: { topUpId: "pay_1" } },
    success_url: "http://127.0.0.1:1/done?session={CHECKOUT_SESSION_ID}",
    cancel_url: "http://127.0.0.1:1/wallet",
    ...extra,
  });
const paySession = (id: string, card = "4242424242424242") =>
  control(fakes.stripe, "pay-session", { id, card });
const pay = (
  amount: number,
  method = "pm_card_bypassPending",
  extra: Partial<Stripe.PaymentIntentCreateParams> = {},
) =>
  stripe.paymentIntents.create({ amount, currency: "usd", payment_method: method, confirm: true, ...extra });
const flush = () => control(fakes.stripe, "settle");
const types = () => hook.events.map(({ type }) => type);
const available = async (stripeAccount?: string) =>
  (await stripe.balance.retrieve({}, stripeAccount ? { stripeAccount } : {})).available[0]?.amount;
const pending = async (stripeAccount?: string) =>
  (await stripe.balance.retrieve({}, stripeAccount ? { stripeAccount } : {})).pending[0]?.amount;
const failure = (work: Promise<unknown>) =>
  work.then(
    () => "done",
    (error: unknown) => {
      if (!(error instanceof Stripe.errors.StripeError)) throw error;
      return `${error.statusCode ?? "-"} ${error.type} ${error.code ?? ""}`.trim();
    },
  );
async function annotator(bank = "000123456789") {
  const account = await stripe.accounts.create({
    type: "express",
    email: "mara@example.com",
    capabilities: { transfers: { requested: true } },
  });
  await control(fakes.stripe, "complete-onboarding", { account: account.id, bank });
  return account.id;
}
const audited = async () =>
  (await control(fakes.stripe, "audit")).accounts as { account: string; balance: number; sum: number }[];

describe("checkout", () => {
  it("charges an open session once, and says so by signed events", async () => {
    const made = await session();
    expect(made).toMatchObject({
      status: "open",
      payment_status: "unpaid",
      amount_total: 5000,
      client_reference_id: "pay_1",
    });
    await paySession(made.id);
    const found = await stripe.checkout.sessions.retrieve(made.id, {
      expand: ["payment_intent.latest_charge.balance_transaction", "line_items"],
    });
    expect(found).toMatchObject({
      status: "complete",
      payment_status: "paid",
      metadata: { topUpId: "pay_1" },
    });
    const intent = found.payment_intent as Stripe.PaymentIntent;
    const charge = intent.latest_charge as Stripe.Charge;
    const transaction = charge.balance_transaction as Stripe.BalanceTransaction;
    expect(intent).toMatchObject({
      status: "succeeded",
      amount_received: 5000,
      metadata: { topUpId: "pay_1" },
    });
    // 2.9 % of $50 and 30 cents, Stripe's published price in the United States.
    expect(transaction).toMatchObject({
      amount: 5000,
      fee: 175,
      net: 4825,
      status: "pending",
      type: "charge",
    });
    expect(found.line_items?.data[0]).toMatchObject({ description: "Wallet", amount_total: 5000 });
    await flush();
    expect(types().sort()).toEqual([
      "charge.succeeded",
      "checkout.session.completed",
      "payment_intent.created",
      "payment_intent.succeeded",
    ]);
    await expect(paySession(made.id)).rejects.toThrow("409");
    expect((await stripe.charges.list()).data).toHaveLength(1);
  });

  it.each([
    ["4000000000000002", "card_declined", "generic_decline"],
    ["4000000000009995", "card_declined", "insufficient_funds"],
    ["4000000000009987", "card_declined", "lost_card"],
    ["4000000000000069", "expired_card", "expired_card"],
    ["4000000000000127", "incorrect_cvc", "incorrect_cvc"],
    ["4000000000000119", "processing_error", "processing_error"],
    ["4242424242424241", "incorrect_number", "incorrect_number"],
  ])("stays open when the card %s is declined, and takes another", async (card, code, declineCode) => {
    const made = await session();
    await expect(paySession(made.id, card)).rejects.toThrow("402");
    const open = await stripe.checkout.sessions.retrieve(made.id, { expand: ["payment_intent"] });
    expect(open.status).toBe("open");
    expect(open.payment_intent).toMatchObject({
      status: "requires_payment_method",
      last_payment_error: { code, decline_code: declineCode },
    });
    expect(await pending()).toBe(0);
    await paySession(made.id);
    expect((await stripe.checkout.sessions.retrieve(made.id)).payment_status).toBe("paid");
  });

  it("expires by time and on request, and cannot be paid after", async () => {
    const [one, two] = [await session(), await session()];
    await stripe.checkout.sessions.expire(one.id);
    await control(fakes.stripe, "clock", { advanceMs: DAYS_MS + 1000 });
    for (const { id } of [one, two]) {
      expect((await stripe.checkout.sessions.retrieve(id)).status).toBe("expired");
      await expect(paySession(id)).rejects.toThrow("409");
    }
  });

  it.each([
    [{ line_items: [] }, "400 StripeInvalidRequestError parameter_missing"],
    [{ success_url: "" }, "400 StripeInvalidRequestError parameter_missing"],
    [{ mode: "subscription" as const }, "400 StripeInvalidRequestError parameter_invalid_enum"],
    [{ no_such: "x" } as object, "400 StripeInvalidRequestError parameter_unknown"],
  ])("refuses %j", async (extra, expected) => {
    expect(await failure(session(extra))).toBe(expected);
  });

  it("refuses less than 50 cents", async () => {
    expect(await failure(session({}, 49))).toBe("400 StripeInvalidRequestError amount_too_small");
  });
});

describe("the checkout page", () => {
  const form = (path: string, fields: Record<string, string>) =>
    fetch(`${fakes.stripe.url}${path}`, {
      method: "POST",
      body: new URLSearchParams(fields),
      redirect: "manual",
    });
  const card = (number: string, extra = {}) => ({ card: number, expiry: "12 / 34", cvc: "123", ...extra });

  it("takes a card and goes back to the success address with the session's id", async () => {
    const made = await session();
    const page = await (await fetch(made.url ?? "")).text();
    expect(page).toContain("Local stand-in");
    expect(page).toContain("http://127.0.0.1:1/wallet");
    const paid = await form(`/checkout/${made.id}/pay`, card("4242 4242 4242 4242"));
    expect(paid.status).toBe(303);
    expect(paid.headers.get("location")).toBe(`http://127.0.0.1:1/done?session=${made.id}`);
  });

  it.each([
    [card("4000 0000 0000 0002"), 402, "Your card was declined."],
    [card("4242"), 422, "Your card number is incomplete."],
    [card("4242424242424242", { expiry: "01 / 20" }), 422, "expiration date is in the past"],
    [card("4242424242424242", { expiry: "13 / 34" }), 422, "expiration date is incomplete"],
    [card("4242424242424242", { cvc: "1" }), 422, "security code is incomplete"],
  ])("shows what is wrong and stays open (%#)", async (fields, status, message) => {
    const made = await session();
    const answer = await form(`/checkout/${made.id}/pay`, fields);
    expect(answer.status).toBe(status);
    const page = await answer.text();
    expect(page).toContain('role="alert"');
    expect(page).toContain(message);
    expect((await stripe.checkout.sessions.retrieve(made.id)).status).toBe("open");
  });

  it("sends to the bank where the card asks for it: refused stays open, confirmed is paid", async () => {
    const made = await session();
    const toBank = await form(`/checkout/${made.id}/pay`, card("4000002760003184"));
    const bank = toBank.headers.get("location") ?? "";
    expect(bank).toMatch(/^\/authenticate\/pi_/);
    const refused = await form(bank, { answer: "refuse" });
    expect(refused.headers.get("location")).toBe(`/checkout/${made.id}`);
    expect(await (await fetch(`${fakes.stripe.url}/checkout/${made.id}`)).text()).toContain(
      "unable to authenticate",
    );
    const again =
      (await form(`/checkout/${made.id}/pay`, card("4000002760003184"))).headers.get("location") ?? "";
    expect((await form(again, { answer: "confirm" })).headers.get("location")).toContain("/done?session=");
    expect((await stripe.checkout.sessions.retrieve(made.id)).payment_status).toBe("paid");
  });

  it("never writes markup that came from outside", async () => {
    const made = await stripe.checkout.sessions.create({
      mode: "payment",
      line_items: [
        {
          quantity: 1,
          price_data: {
            currency: "usd",
            unit_amount: 100,
            product_data: { name: "<img src=x onerror=alert(1)>" },
          },
        },
      ],
      success_url: "http://127.0.0.1:1/done",
    });
    const page = await (await form(`/checkout/${made.id}/pay`, card('"><script>alert(1)</script>'))).text();
    expect(page).not.toContain("<img src=x");
    expect(page).not.toContain("<script>");
  });
});

describe("payment intents", () => {
  it("go through confirmation, capture in part and cancellation", async () => {
    const made = await stripe.paymentIntents.create({ amount: 900, currency: "usd" });
    expect(made.status).toBe("requires_payment_method");
    expect((await stripe.paymentIntents.update(made.id, { payment_method: "pm_card_visa" })).status).toBe(
      "requires_confirmation",
    );
    expect((await stripe.paymentIntents.confirm(made.id)).status).toBe("succeeded");
    const held = await pay(1000, "pm_card_visa", { capture_method: "manual" });
    expect(held).toMatchObject({ status: "requires_capture", amount_capturable: 1000, amount_received: 0 });
    expect(await stripe.paymentIntents.capture(held.id, { amount_to_capture: 600 })).toMatchObject({
      status: "succeeded",
      amount_received: 600,
    });
    const other = await stripe.paymentIntents.create({ amount: 900, currency: "usd" });
    expect(await stripe.paymentIntents.cancel(other.id)).toMatchObject({ status: "canceled" });
    expect(await failure(stripe.paymentIntents.confirm(other.id, { payment_method: "pm_card_visa" }))).toBe(
      "400 StripeInvalidRequestError payment_intent_unexpected_state",
    );
  });

  it("come back from a decline with 402 and its reason", async () => {
    const error = await pay(900, "pm_card_visa_chargeDeclinedInsufficientFunds").catch(
      (thrown: unknown) => thrown as Stripe.errors.StripeCardError,
    );
    expect(error).toMatchObject({
      type: "StripeCardError",
      statusCode: 402,
      code: "card_declined",
      decline_code: "insufficient_funds",
      payment_intent: { status: "requires_payment_method" },
    });
    expect(await failure(pay(900, "pm_card_visa", { currency: "eur" }))).toBe(
      "400 StripeInvalidRequestError parameter_invalid_enum",
    );
  });

  it("wait for the bank where a card needs it", async () => {
    const intent = await pay(900, "pm_card_authenticationRequired", {
      return_url: "http://127.0.0.1:1/back",
    });
    expect(intent.status).toBe("requires_action");
    const page = intent.next_action?.redirect_to_url?.url ?? "";
    const answer = await fetch(page, {
      method: "POST",
      body: new URLSearchParams({ answer: "confirm" }),
      redirect: "manual",
    });
    expect(answer.headers.get("location")).toContain("redirect_status=succeeded");
    expect((await stripe.paymentIntents.retrieve(intent.id)).status).toBe("succeeded");
  });
});

describe("refunds", () => {
  it("give back in parts, up to what is left", async () => {
    const intent = await pay(1000);
    await pay(5000);
    const first = await stripe.refunds.create({ payment_intent: intent.id, amount: 400 });
    expect(first).toMatchObject({ status: "succeeded", amount: 400 });
    expect(await failure(stripe.refunds.create({ payment_intent: intent.id, amount: 601 }))).toBe(
      "400 StripeInvalidRequestError",
    );
    await stripe.refunds.create({ payment_intent: intent.id });
    expect(await failure(stripe.refunds.create({ payment_intent: intent.id }))).toBe(
      "400 StripeInvalidRequestError charge_already_refunded",
    );
    const charge = await stripe.charges.retrieve(intent.latest_charge as string);
    expect(charge).toMatchObject({ amount_refunded: 1000, refunded: true });
    // The fees stay with Stripe: 59 cents of $10.00 and $1.75 of $50.00.
    expect(await available()).toBe(5000 - 59 - 175);
  });

  it("take the money of a payment that is still pending out of what is pending", async () => {
    await pay(5000, "pm_card_visa");
    const intent = await pay(1000, "pm_card_visa");
    await stripe.refunds.create({ payment_intent: intent.id });
    expect([await available(), await pending()]).toEqual([0, 5000 - 175 - 59]);
  });

  it("are refused where the balance does not hold them", async () => {
    const intent = await pay(1000);
    const account = await annotator();
    await stripe.transfers.create({ amount: 900, currency: "usd", destination: account });
    expect(await failure(stripe.refunds.create({ payment_intent: intent.id }))).toBe(
      "400 StripeInvalidRequestError balance_insufficient",
    );
  });

  it("may fail later, and then the money is back", async () => {
    await pay(5000);
    const intent = await pay(1000, "pm_card_refundFail");
    await control(fakes.stripe, "clock", { advanceMs: 3 * DAYS_MS });
    const before = await available();
    const refund = await stripe.refunds.create({ payment_intent: intent.id });
    await flush();
    expect((await stripe.refunds.retrieve(refund.id)).status).toBe("failed");
    expect(await available()).toBe(before);
    expect(types()).toContain("refund.failed");
  });
});

describe("balances", () => {
  it("become available in time, at once with the bypassing card", async () => {
    await pay(1000, "pm_card_visa");
    expect([await available(), await pending()]).toEqual([0, 941]);
    await pay(1000, "pm_card_bypassPending");
    expect([await available(), await pending()]).toEqual([941, 941]);
    await control(fakes.stripe, "clock", { advanceMs: 2 * DAYS_MS });
    expect([await available(), await pending()]).toEqual([1882, 0]);
  });

  it("equal the sum of their transactions after everything that moves money", async () => {
    const account = await annotator();
    const failing = await annotator("000111111116");
    for (let round = 0; round < 5; round += 1) {
      const intent = await pay(3000 + round);
      await pay(700, "pm_card_createDispute");
      await stripe.refunds.create({ payment_intent: intent.id, amount: 100 + round });
      const transfer = await stripe.transfers.create({
        amount: 500,
        currency: "usd",
        destination: account,
        source_transaction: intent.latest_charge as string,
      });
      await stripe.transfers.createReversal(transfer.id, { amount: 120 });
      await stripe.transfers.create({ amount: 200, currency: "usd", destination: failing });
      await stripe.payouts.create({ amount: 100, currency: "usd" }, { stripeAccount: account });
      await stripe.payouts.create({ amount: 150, currency: "usd" }, { stripeAccount: failing });
      await flush();
    }
    const accounts = await audited();
    expect(accounts).toHaveLength(3);
    for (const { balance, sum } of accounts) expect(balance).toBe(sum);
    let listed = 0;
    for await (const transaction of stripe.balanceTransactions.list({ limit: 100 }))
      listed += transaction.net;
    expect(listed).toBe(((await available()) ?? 0) + ((await pending()) ?? 0));
    expect(await available(failing)).toBe(5 * 200);
  });
});

describe("connected accounts", () => {
  it("become ready by onboarding, through a link that serves once", async () => {
    const account = await stripe.accounts.create({
      type: "express",
      email: "mara@example.com",
      capabilities: { transfers: { requested: true } },
      metadata: { userId: "u1" },
    });
    expect(account).toMatchObject({
      payouts_enabled: false,
      details_submitted: false,
      capabilities: { transfers: "inactive" },
    });
    expect(account.requirements?.currently_due).toContain("external_account");
    const link = await stripe.accountLinks.create({
      account: account.id,
      refresh_url: "http://127.0.0.1:1/refresh",
      return_url: "http://127.0.0.1:1/return",
      type: "account_onboarding",
    });
    expect(await (await fetch(link.url)).text()).toContain("Local stand-in");
    const send = () =>
      fetch(link.url, {
        method: "POST",
        body: new URLSearchParams({ bank: "000123456789" }),
        redirect: "manual",
      });
    expect((await send()).headers.get("location")).toBe("http://127.0.0.1:1/return");
    expect((await send()).headers.get("location")).toBe("http://127.0.0.1:1/refresh");
    const ready = await stripe.accounts.retrieve(account.id);
    expect(ready).toMatchObject({
      payouts_enabled: true,
      details_submitted: true,
      capabilities: { transfers: "active" },
      metadata: { userId: "u1" },
    });
    expect(ready.external_accounts?.data[0]).toMatchObject({
      object: "bank_account",
      last4: "6789",
      routing_number: "110000000",
    });
    await flush();
    expect(hook.events).toContainEqual(
      expect.objectContaining({ type: "account.updated", account: account.id }),
    );
  });

  it("have links that expire", async () => {
    const account = await stripe.accounts.create({
      type: "express",
      capabilities: { transfers: { requested: true } },
    });
    const link = await stripe.accountLinks.create({
      account: account.id,
      refresh_url: "http://127.0.0.1:1/refresh",
      return_url: "http://127.0.0.1:1/return",
      type: "account_onboarding",
    });
    await control(fakes.stripe, "clock", { advanceMs: 301_000 });
    expect((await fetch(link.url, { redirect: "manual" })).headers.get("location")).toBe(
      "http://127.0.0.1:1/refresh",
    );
  });

  it("are looked at first where that is asked for, and can be restricted later", async () => {
    await control(fakes.stripe, "settings", { verifyMs: 60_000 });
    const account = await annotator();
    expect((await stripe.accounts.retrieve(account)).capabilities?.transfers).toBe("pending");
    await control(fakes.stripe, "clock", { advanceMs: 60_001 });
    expect((await stripe.accounts.retrieve(account)).capabilities?.transfers).toBe("active");
    await control(fakes.stripe, "account", { account, state: "restricted" });
    await pay(1000);
    expect(
      await failure(stripe.transfers.create({ amount: 100, currency: "usd", destination: account })),
    ).toBe("400 StripeInvalidRequestError insufficient_capabilities_for_transfer");
    await control(fakes.stripe, "settings", { verifyMs: 0 });
  });

  it("that are unknown are refused with 403", async () => {
    expect(await failure(stripe.accounts.retrieve("acct_none"))).toBe(
      "403 StripePermissionError account_invalid",
    );
    expect(await failure(stripe.balance.retrieve({}, { stripeAccount: "acct_none" }))).toBe(
      "403 StripePermissionError account_invalid",
    );
  });
});

describe("transfers", () => {
  it("need an available balance, or a charge as their source", async () => {
    const account = await annotator();
    const intent = await pay(1000, "pm_card_visa");
    const transfer = (extra = {}) =>
      stripe.transfers.create({ amount: 800, currency: "usd", destination: account, ...extra });
    expect(await failure(transfer())).toBe("400 StripeInvalidRequestError balance_insufficient");
    const made = await transfer({
      source_transaction: intent.latest_charge as string,
      metadata: { payoutId: "out_1" },
    });
    expect(made).toMatchObject({
      amount: 800,
      destination: account,
      transfer_group: `group_${intent.id}`,
      metadata: { payoutId: "out_1" },
    });
    expect([await available(account), await pending(account)]).toEqual([0, 800]);
    expect(await failure(transfer({ source_transaction: intent.latest_charge as string }))).toBe(
      "400 StripeInvalidRequestError transfer_source_balance_parameters_mismatch",
    );
    await control(fakes.stripe, "clock", { advanceMs: 2 * DAYS_MS });
    expect(await available(account)).toBe(800);
    expect(await available()).toBe(1000 - 59 - 800);
  });

  it("are found by group and destination", async () => {
    const account = await annotator();
    await pay(5000);
    for (const group of ["g1", "g2", "g1"])
      await stripe.transfers.create({
        amount: 100,
        currency: "usd",
        destination: account,
        transfer_group: group,
      });
    expect((await stripe.transfers.list({ transfer_group: "g1" })).data).toHaveLength(2);
    expect((await stripe.transfers.list({ destination: account, limit: 2 })).has_more).toBe(true);
  });

  it("are reversed up to their amount, where the destination still has it", async () => {
    const account = await annotator();
    await pay(5000);
    const before = await available();
    const transfer = await stripe.transfers.create({ amount: 1000, currency: "usd", destination: account });
    await stripe.transfers.createReversal(transfer.id, { amount: 300 });
    expect(await failure(stripe.transfers.createReversal(transfer.id, { amount: 701 }))).toBe(
      "400 StripeInvalidRequestError",
    );
    await stripe.payouts.create({ amount: 500, currency: "usd" }, { stripeAccount: account });
    expect(await failure(stripe.transfers.createReversal(transfer.id))).toBe(
      "400 StripeInvalidRequestError balance_insufficient",
    );
    await stripe.transfers.createReversal(transfer.id, { amount: 200 });
    expect(await stripe.transfers.retrieve(transfer.id)).toMatchObject({
      amount_reversed: 500,
      reversed: false,
    });
    expect([await available(), await available(account)]).toEqual([(before ?? 0) - 500, 0]);
  });
});

describe("payouts", () => {
  const steps = async (account: string, amount = 500) => {
    await pay(5000);
    await stripe.transfers.create({ amount, currency: "usd", destination: account });
    return stripe.payouts.create({ amount, currency: "usd" }, { stripeAccount: account });
  };

  it("go from pending over in transit to paid", async () => {
    const account = await annotator();
    const payout = await steps(account);
    expect(payout.status).toBe("pending");
    await eventually(() => hook.events.some(({ type }) => type === "payout.paid"));
    expect(types().filter((type) => type.startsWith("payout."))).toEqual([
      "payout.created",
      "payout.updated",
      "payout.paid",
    ]);
    expect((await stripe.payouts.retrieve(payout.id, {}, { stripeAccount: account })).status).toBe("paid");
    expect(await failure(stripe.payouts.retrieve(payout.id))).toBe(
      "404 StripeInvalidRequestError resource_missing",
    );
    expect(
      await failure(stripe.payouts.create({ amount: 1, currency: "usd" }, { stripeAccount: account })),
    ).toBe("400 StripeInvalidRequestError balance_insufficient");
  });

  it.each([
    ["000111111116", "no_account"],
    ["000111111113", "account_closed"],
  ])("to the bank account %s fail, and the money is back", async (bank, code) => {
    const account = await annotator(bank);
    const payout = await steps(account);
    await flush();
    const found = await stripe.payouts.retrieve(
      payout.id,
      { expand: ["failure_balance_transaction"] },
      { stripeAccount: account },
    );
    expect(found).toMatchObject({
      status: "failed",
      failure_code: code,
      failure_balance_transaction: { type: "payout_failure", amount: 500 },
    });
    expect(await available(account)).toBe(500);
  });

  it("that were paid may fail after all, and pending ones can be canceled", async () => {
    const account = await annotator();
    const payout = await steps(account);
    await flush();
    await control(fakes.stripe, "payout", { id: payout.id, outcome: "failed", code: "account_closed" });
    expect((await stripe.payouts.retrieve(payout.id, {}, { stripeAccount: account })).status).toBe("failed");
    expect(await available(account)).toBe(500);
    await control(fakes.stripe, "settings", { payoutStepMs: 60_000 });
    const second = await stripe.payouts.create({ amount: 500, currency: "usd" }, { stripeAccount: account });
    expect((await stripe.payouts.cancel(second.id, {}, { stripeAccount: account })).status).toBe("canceled");
    expect(await available(account)).toBe(500);
    await control(fakes.stripe, "settings", { payoutStepMs: 20 });
  });
});

describe("disputes", () => {
  const disputed = async () => {
    await pay(5000);
    const intent = await pay(1000, "pm_card_createDispute");
    const [dispute] = (await stripe.disputes.list({ payment_intent: intent.id })).data;
    if (!dispute) throw new Error("the charge is not disputed");
    return { intent, dispute };
  };

  it("take the money and a fee, and give the money back when won", async () => {
    const { intent, dispute } = await disputed();
    const withdrawn = (await available()) ?? 0;
    expect(dispute).toMatchObject({ status: "needs_response", amount: 1000 });
    // $15.00 for each dispute received: Stripe's published price in the United States.
    expect(dispute.balance_transactions).toMatchObject([{ amount: -1000, fee: 1500, net: -2500 }]);
    expect(await failure(stripe.refunds.create({ payment_intent: intent.id }))).toBe(
      "400 StripeInvalidRequestError charge_disputed",
    );
    expect(
      (
        await stripe.disputes.update(dispute.id, {
          evidence: { uncategorized_text: "winning_evidence" },
          submit: true,
        })
      ).status,
    ).toBe("under_review");
    await flush();
    expect((await stripe.disputes.retrieve(dispute.id)).status).toBe("won");
    expect(await available()).toBe(withdrawn + 1000);
    expect(types()).toEqual(
      expect.arrayContaining([
        "charge.dispute.created",
        "charge.dispute.funds_withdrawn",
        "charge.dispute.closed",
        "charge.dispute.funds_reinstated",
      ]),
    );
  });

  it("are lost by losing evidence, by giving in, and by silence", async () => {
    const one = await disputed();
    await stripe.disputes.update(one.dispute.id, { evidence: { uncategorized_text: "losing_evidence" } });
    await flush();
    expect((await stripe.disputes.retrieve(one.dispute.id)).status).toBe("lost");
    const two = await disputed();
    expect((await stripe.disputes.close(two.dispute.id)).status).toBe("lost");
    const three = await disputed();
    await control(fakes.stripe, "clock", { advanceMs: 10 * DAYS_MS });
    expect((await stripe.disputes.retrieve(three.dispute.id)).status).toBe("lost");
    expect(types()).not.toContain("charge.dispute.funds_reinstated");
  });
});

describe("idempotency", () => {
  const create = (idempotencyKey: string, amount = 900) =>
    stripe.paymentIntents.create(
      { amount, currency: "usd", payment_method: "pm_card_visa", confirm: true },
      { idempotencyKey },
    );

  it("replays the first answer, and refuses other parameters under the key", async () => {
    const [one, two] = [await create("k1"), await create("k1")];
    expect(two.id).toBe(one.id);
    expect(two.lastResponse.headers["idempotent-replayed"]).toBe("true");
    expect((await stripe.charges.list()).data).toHaveLength(1);
    expect(await failure(create("k1", 901))).toBe("400 StripeIdempotencyError");
    await control(fakes.stripe, "clock", { advanceMs: DAYS_MS + 1 });
    expect((await create("k1")).id).not.toBe(one.id);
  });

  it("keeps a refusal too: balance_insufficient replays after a top-up", async () => {
    const destination = await annotator();
    const transfer = (idempotencyKey: string) =>
      stripe.transfers.create({ amount: 500, currency: "usd", destination }, { idempotencyKey });
    expect(await failure(transfer("transfer:1:0"))).toContain("balance_insufficient");
    await stripe.topups.create({ amount: 10_000, currency: "usd", description: "more" });
    expect(await failure(transfer("transfer:1:0"))).toContain("balance_insufficient");
    expect((await transfer("transfer:1:1")).amount).toBe(500);
  });

  it("does not keep what was refused before it began", async () => {
    expect(
      await failure(stripe.paymentIntents.create({ amount: 0, currency: "usd" }, { idempotencyKey: "k2" })),
    ).toContain("parameter_invalid_integer");
    expect(
      (await stripe.paymentIntents.create({ amount: 900, currency: "usd" }, { idempotencyKey: "k2" })).amount,
    ).toBe(900);
  });

  it("answers 409 while the first is in progress", async () => {
    await control(fakes.stripe, "fault", {
      match: "POST /v1/payment_intents",
      when: "inside",
      action: "delay",
      delayMs: 150,
    });
    const first = create("k3");
    await new Promise((resolve) => setTimeout(resolve, 50));
    expect(await failure(create("k3"))).toBe("409 StripeAPIError idempotency_key_in_use");
    expect((await first).status).toBe("succeeded");
  });

  it("charges once when the answer is lost and the SDK tries again", async () => {
    await control(fakes.stripe, "fault", {
      match: "POST /v1/payment_intents",
      when: "after",
      action: "drop",
      times: 1,
    });
    expect((await create("k4")).status).toBe("succeeded");
    expect((await stripe.charges.list()).data).toHaveLength(1);
  });

  it("makes a lost answer visible when it is lost twice, with the charge done", async () => {
    await control(fakes.stripe, "fault", {
      match: "POST /v1/payment_intents",
      when: "after",
      action: "drop",
      times: 2,
    });
    expect(await failure(create("k5"))).toContain("StripeConnectionError");
    expect((await stripe.charges.list()).data).toHaveLength(1);
    expect((await create("k5")).status).toBe("succeeded");
    expect((await stripe.charges.list()).data).toHaveLength(1);
  });

  it("replays a 500 that came after the request began", async () => {
    await control(fakes.stripe, "fault", {
      match: "POST /v1/payment_intents",
      when: "inside",
      action: "status",
      status: 500,
    });
    expect(await failure(create("k6"))).toContain("500 StripeAPIError");
    expect(await failure(create("k6"))).toContain("500 StripeAPIError");
    expect((await stripe.charges.list()).data).toHaveLength(0);
  });
});

describe("requests", () => {
  it("need the right test key", async () => {
    const as = (key: string) =>
      new Stripe(key, {
        host: "127.0.0.1",
        port: fakes.stripe.port,
        protocol: "http",
        maxNetworkRetries: 0,
        telemetry: false,
      });
    expect(await failure(as("sk_test_other").balance.retrieve())).toBe("401 StripeAuthenticationError");
    expect(await failure(as("sk_live_real").balance.retrieve())).toBe("401 StripeAuthenticationError");
  });

  it("page through lists and expand at most four levels", async () => {
    for (let i = 0; i < 7; i += 1) await pay(1000 + i);
    const amounts: number[] = [];
    for await (const { amount } of stripe.charges.list({ limit: 3 })) amounts.push(amount);
    expect(amounts).toEqual([1006, 1005, 1004, 1003, 1002, 1001, 1000]);
    const page = await stripe.charges.list({ limit: 2, expand: ["data.balance_transaction"] });
    expect(page.data[0]?.balance_transaction).toMatchObject({ object: "balance_transaction" });
    const before = await stripe.charges.list({ limit: 2, ending_before: page.data[1]?.id ?? "" });
    expect(before.data.map(({ amount }) => amount)).toEqual([1006]);
    expect(await failure(stripe.charges.list({ limit: 101 }))).toContain("400");
    expect(await failure(stripe.charges.list({ expand: ["data.a.b.c.d"] }))).toContain(
      "property_expansion_max_depth",
    );
    expect(await failure(stripe.charges.list({ expand: ["data.nothing"] }))).toContain("400");
  });

  it("keep metadata, merge it and take keys away", async () => {
    const { id } = await stripe.paymentIntents.create({
      amount: 900,
      currency: "usd",
      metadata: { a: "1", _b: "2" },
    });
    expect((await stripe.paymentIntents.update(id, { metadata: { a: "", c: "3" } })).metadata).toEqual({
      _b: "2",
      c: "3",
    });
  });
});

describe("webhooks", () => {
  const undisturbed = () =>
    control(fakes.stripe, "webhooks", { paused: false, drop: 0, duplicate: 0, shuffle: false, delayMs: 0 });

  it("are tried again with a fresh signature until they are taken", async () => {
    hook.answer = 500;
    await stripe.topups.create({ amount: 100, currency: "usd" });
    await eventually(() => hook.signatures.length >= 3);
    expect(hook.events).toEqual([]);
    hook.answer = 200;
    await eventually(() => hook.events.length === 2);
    await eventually(
      async () =>
        (await control(fakes.stripe, "webhooks")).pending instanceof Array &&
        ((await control(fakes.stripe, "webhooks")).pending as unknown[]).length === 0,
    );
  });

  it("are dropped, doubled and shuffled on request", async () => {
    await control(fakes.stripe, "webhooks", { drop: 1, duplicate: 1 });
    await stripe.topups.create({ amount: 100, currency: "usd" });
    await flush();
    expect(types()).toEqual(["topup.succeeded", "topup.succeeded"]);
    await undisturbed();
  });

  it("that never came can be sent again, and found as events", async () => {
    await control(fakes.stripe, "webhooks", { drop: 2 });
    await stripe.topups.create({ amount: 100, currency: "usd" });
    await flush();
    expect(hook.events).toEqual([]);
    const listed = await stripe.events.list({ types: ["topup.succeeded"] });
    expect(listed.data).toHaveLength(1);
    await control(fakes.stripe, "webhooks/resend", { event: listed.data[0]?.id });
    await flush();
    expect(hook.events).toMatchObject([{ id: listed.data[0]?.id }]);
    await undisturbed();
  });

  it("carry a signature for each secret while one is being replaced", async () => {
    await control(fakes.stripe, "webhooks/roll-secret", { secret: "whsec_next" });
    await stripe.topups.create({ amount: 100, currency: "usd" });
    await flush();
    expect(hook.signatures.every((signature) => signature.match(/v1=/g)?.length === 2)).toBe(true);
    expect(hook.events).toHaveLength(2);
  });

  it("go to endpoints of the API by type, with a secret of their own", async () => {
    const other = await startHook();
    const endpoint = await stripe.webhookEndpoints.create({
      url: other.url,
      enabled_events: ["topup.created"],
    });
    expect(endpoint.secret).toMatch(/^whsec_/);
    await stripe.topups.create({ amount: 100, currency: "usd" });
    await control(fakes.stripe, "webhooks/flush");
    // The other endpoint verifies with the wrong secret and refuses; only one type was sent to it.
    const left = (await control(fakes.stripe, "webhooks")).pending as {
      endpoint: string;
      lastStatus: number;
    }[];
    expect(left).toMatchObject([{ endpoint: endpoint.id, lastStatus: 400 }]);
    await stripe.webhookEndpoints.del(endpoint.id);
    other.server.close();
  });
});

it("keeps payments, keys, timers and undelivered events over a restart", async () => {
  const account = await annotator();
  const intent = await stripe.paymentIntents.create(
    { amount: 5000, currency: "usd", payment_method: "pm_card_bypassPending", confirm: true },
    { idempotencyKey: "kept" },
  );
  await stripe.transfers.create({ amount: 700, currency: "usd", destination: account });
  hook.answer = 500;
  const payout = await stripe.payouts.create({ amount: 700, currency: "usd" }, { stripeAccount: account });
  const before = [await available(), await available(account)];
  fakes = await fakes.restart();
  ({ stripe } = clientsOf(fakes));
  expect([await available(), await available(account)]).toEqual(before);
  expect(
    (
      await stripe.paymentIntents.create(
        { amount: 5000, currency: "usd", payment_method: "pm_card_bypassPending", confirm: true },
        { idempotencyKey: "kept" },
      )
    ).id,
  ).toBe(intent.id);
  hook.answer = 200;
  await flush();
  expect((await stripe.payouts.retrieve(payout.id, {}, { stripeAccount: account })).status).toBe("paid");
  expect(types()).toEqual(expect.arrayContaining(["payout.created", "payout.paid"]));
});
