import Ajv from "ajv";
import Stripe from "stripe";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { ROUTES } from "@/fakes/stripe/routes";
import { clientsOf, control, sharedGolden, startTestFakes, type TestFakes } from "@/tests/support/fakes";

// Types of the stripe package 23.1.0 (MIT) as JSON Schema, and Stripe's public OpenAPI description (MIT, 2023-09-12).
const types = sharedGolden("stripe/stripe-types.schema.json");
const openApi = sharedGolden("stripe/stripe-spec-pruned.json");

type Schema = { $defs: Record<string, unknown>; objects: Record<string, { $ref: string }> };

describe.skipIf(!types)("answers fit the SDK's own types:", () => {
  let fakes: TestFakes;
  let stripe: Stripe;
  const seen = new Map<string, unknown[]>();
  beforeAll(async () => {
    fakes = await startTestFakes({ stripe: { disputeFeeCents: 1500 } });
    ({ stripe } = clientsOf(fakes));
    await everything();
  });
  afterAll(() => fakes.remove());

  /** Brings about every object in every state that the product can meet, and keeps what was answered. */
  async function everything(): Promise<void> {
    const keep = <T extends { object: string }>(answer: T): T => {
      seen.set(answer.object, [...(seen.get(answer.object) ?? []), JSON.parse(JSON.stringify(answer))]);
      return answer;
    };
    const session = () =>
      stripe.checkout.sessions.create({
        mode: "payment",
        line_items: [
          {
            quantity: 2,
            price_data: { currency: "usd", unit_amount: 2500, product_data: { name: "Wallet" } },
          },
        ],
        success_url: "http://127.0.0.1:1/done",
        customer_email: "a@example.com",
      });
    const made = keep(await session());
    await control(fakes.stripe, "pay-session", { id: made.id });
    keep(
      await stripe.checkout.sessions.retrieve(made.id, {
        expand: ["payment_intent.latest_charge.balance_transaction", "line_items"],
      }),
    );
    for (const item of (await stripe.checkout.sessions.listLineItems(made.id)).data) keep(item);
    keep(await stripe.checkout.sessions.expire((await session()).id));
    const paid = keep(
      await stripe.paymentIntents.create({
        amount: 9000,
        currency: "usd",
        payment_method: "pm_card_visa",
        confirm: true,
      }),
    );
    keep(await stripe.paymentIntents.create({ amount: 900, currency: "usd" }));
    keep(
      await stripe.paymentIntents.create({
        amount: 900,
        currency: "usd",
        payment_method: "pm_card_visa",
        confirm: true,
        capture_method: "manual",
      }),
    );
    keep(
      await stripe.paymentIntents.create({
        amount: 900,
        currency: "usd",
        payment_method: "pm_card_authenticationRequired",
        confirm: true,
        return_url: "http://127.0.0.1:1/",
      }),
    );
    await stripe.paymentIntents
      .create({ amount: 900, currency: "usd", payment_method: "pm_card_chargeDeclined", confirm: true })
      .catch(() => undefined);
    await stripe.paymentIntents.create({
      amount: 900,
      currency: "usd",
      payment_method: "pm_card_createDispute",
      confirm: true,
    });
    for (const intent of (await stripe.paymentIntents.list({ limit: 100 })).data) keep(intent);
    const refund = keep(await stripe.refunds.create({ payment_intent: paid.id, amount: 100 }));
    keep(await stripe.refunds.retrieve(refund.id, { expand: ["charge", "balance_transaction"] }));
    const account = keep(
      await stripe.accounts.create({
        type: "express",
        email: "b@example.com",
        capabilities: { transfers: { requested: true } },
      }),
    );
    keep(
      await stripe.accountLinks.create({
        account: account.id,
        refresh_url: "http://127.0.0.1:1/",
        return_url: "http://127.0.0.1:1/",
        type: "account_onboarding",
      }),
    );
    await control(fakes.stripe, "complete-onboarding", { account: account.id, bank: "000111111116" });
    const ready = keep(await stripe.accounts.retrieve(account.id));
    for (const bank of ready.external_accounts?.data ?? []) keep(bank);
    for (const capability of (await stripe.accounts.listCapabilities(account.id)).data) keep(capability);
    keep(await stripe.accounts.createLoginLink(account.id));
    const transfer = keep(
      await stripe.transfers.create({ amount: 1000, currency: "usd", destination: account.id }),
    );
    keep(await stripe.transfers.createReversal(transfer.id, { amount: 100 }));
    keep(
      await stripe.transfers.retrieve(transfer.id, {
        expand: ["destination_payment", "balance_transaction"],
      }),
    );
    const payout = keep(
      await stripe.payouts.create({ amount: 500, currency: "usd" }, { stripeAccount: account.id }),
    );
    await control(fakes.stripe, "settle");
    keep(
      await stripe.payouts.retrieve(
        payout.id,
        { expand: ["destination", "failure_balance_transaction"] },
        { stripeAccount: account.id },
      ),
    );
    for (const dispute of (await stripe.disputes.list()).data) keep(dispute);
    for (const charge of (await stripe.charges.list({ limit: 100 })).data) keep(charge);
    for (const charge of (await stripe.charges.list({ limit: 100 }, { stripeAccount: account.id })).data)
      keep(charge);
    for (const transaction of (await stripe.balanceTransactions.list({ limit: 100 })).data) keep(transaction);
    for (const transaction of (
      await stripe.balanceTransactions.list({ limit: 100 }, { stripeAccount: account.id })
    ).data)
      keep(transaction);
    keep(await stripe.balance.retrieve());
    keep(await stripe.topups.create({ amount: 100, currency: "usd", description: "more" }));
    keep(await stripe.customers.create({ email: "c@example.com" }));
    for (const method of (await stripe.paymentMethods.list()).data) keep(method);
    keep(await stripe.webhookEndpoints.create({ url: "http://127.0.0.1:1/", enabled_events: ["*"] }));
    for (const event of (await stripe.events.list({ limit: 100 })).data) keep(event);
    // Webhooks to the closed port would be tried again for the rest of the test.
    await control(fakes.stripe, "webhooks", { paused: true });
  }

  const schema = types === undefined ? null : (JSON.parse(types) as Schema);
  const ajv = new Ajv({ strict: false, allErrors: true });
  if (schema) ajv.addSchema({ ...schema, $id: "stripe" });
  const KINDS = Object.keys(schema?.objects ?? {}).filter(
    (kind) => !["application_fee", "deleted_customer", "deleted_account"].includes(kind),
  );

  it.each(KINDS)("%s", (kind) => {
    const name = kind === "event_base" ? "event" : kind;
    const answers = seen.get(name) ?? [];
    expect(answers.length, `no ${name} was answered`).toBeGreaterThan(0);
    const ref = schema?.objects[kind]?.$ref ?? "";
    const validate = ajv.getSchema(`stripe${ref}`);
    if (!validate) throw new Error(`no schema ${ref}`);
    for (const answer of answers) {
      const isRight = validate(answer);
      const problems = (validate.errors ?? [])
        .filter(({ keyword }) => keyword !== "anyOf")
        .map(({ instancePath, message }) => `${instancePath} ${message}`);
      expect(isRight, `${JSON.stringify(answer).slice(0, 300)}\n${problems.join("\n")}`).toBe(true);
    }
  });
});

describe.skipIf(!openApi)("parameters that are taken are Stripe's:", () => {
  type Operation = {
    parameters?: { name: string; in: string }[];
    requestBody?: { content: Record<string, { schema: { properties?: Record<string, unknown> } }> };
  };
  const paths =
    openApi === undefined
      ? {}
      : (JSON.parse(openApi) as { paths: Record<string, Record<string, Operation>> }).paths;
  const templates = new Map(Object.keys(paths).map((path) => [path.replace(/\{[^}]+\}/g, ":x"), path]));
  /** Newer than the description of September 2023: in the types of the SDK. */
  const NEWER: Record<string, string[]> = {
    "POST /v1/accounts": ["controller"],
    "POST /v1/account_links": ["collection_options"],
    "GET /v1/checkout/sessions": ["created", "status", "customer"],
  };

  it.each(ROUTES.map((route) => [`${route.method} ${route.path}`, route] as const))("%s", (name, route) => {
    const path = templates.get(route.path.replace(/:[a-z]+/g, ":x"));
    const operation = path === undefined ? undefined : paths[path]?.[route.method.toLowerCase()];
    expect(operation, "the description has no such operation").toBeDefined();
    const known = new Set([
      ...(operation?.parameters ?? []).map((parameter) => parameter.name),
      ...Object.values(operation?.requestBody?.content ?? {}).flatMap(({ schema }) =>
        Object.keys(schema.properties ?? {}),
      ),
      ...(NEWER[name] ?? []),
    ]);
    const strange = route.params.filter((param) => !known.has(param));
    // A filter that Stripe does not have would hide that the product relies on it.
    expect(strange).toEqual([]);
  });
});
