import { createHash, createHmac, randomBytes } from "node:crypto";
import { existsSync, mkdirSync, readFileSync, renameSync, writeFileSync } from "node:fs";
import type { Server, ServerResponse } from "node:http";
import path from "node:path";
import { escapeHtml, page, readBody, sendHtml, sendJson, serve, type Call } from "./http";

export type StripeOptions = { port: number; folder: string; webhookUrl: string | null; webhookSecret: string };

type Row = Record<string, unknown> & { id: string };
type Form = { [name: string]: string | Form };

type State = {
  sessions: Record<string, Row>;
  intents: Record<string, Row>;
  charges: Record<string, Row>;
  refunds: Record<string, Row>;
  accounts: Record<string, Row>;
  links: Record<string, { account: string; returnUrl: string; used: boolean }>;
  transfers: Record<string, Row>;
  payouts: Record<string, Row>;
  disputes: Record<string, Row>;
  transactions: (Row & { account: string; amount: number; fee: number; net: number; available_on: number })[];
  events: (Row & { account?: string })[];
  keys: Record<string, { digest: string; status: number; body: unknown; atMs: number }>;
  deliveries: { eventId: string; attempt: number; dueMs: number }[];
};

const API_VERSION = "2026-10-28.endive";
const PLATFORM = "platform";
const KEY_LIFETIME_MS = 86_400_000;

/** Test cards of Stripe's documentation with their decline codes (https://docs.stripe.com/testing). */
const DECLINES: Record<string, [code: string, declineCode: string, message: string]> = {
  "4000000000000002": ["card_declined", "generic_decline", "Your card was declined."],
  "4000000000009995": ["card_declined", "insufficient_funds", "Your card has insufficient funds."],
  "4000000000009987": ["card_declined", "lost_card", "Your card was declined."],
  "4000000000000069": ["expired_card", "expired_card", "Your card has expired."],
  "4000000000000127": ["incorrect_cvc", "incorrect_cvc", "Your card's security code is incorrect."],
  "4000000000000119": ["processing_error", "processing_error", "An error occurred while processing your card. Try again in a little bit."],
};
const CARD_3DS = "4000002760003184";
const CARD_DISPUTED = "4000000000000259";
const BANK_FAILS: Record<string, [string, string]> = {
  "000111111116": ["no_account", "The bank account could not be located."],
  "000111111113": ["account_closed", "The bank account has been closed."],
};

class StripeError extends Error {
  constructor(
    readonly status: number,
    readonly type: string,
    readonly code: string,
    message: string,
    readonly extra: Record<string, unknown> = {},
  ) {
    super(message);
  }
}

const invalid = (message: string, code = "parameter_invalid") => new StripeError(400, "invalid_request_error", code, message);
const missing = (what: string, id: string) => new StripeError(404, "invalid_request_error", "resource_missing", `No such ${what}: '${id}'`);

/** Card fee: 2.9 % and 30 cents, as Stripe's published price for cards in the United States. */
const feeOf = (amount: number) => Math.round(amount * 0.029) + 30;

/**
 * The Stripe of this machine: the objects and flows that the product uses, with idempotency, balance
 * transactions that sum to the balances, signed webhooks that are tried again, and plain pages for people.
 */
export async function startStripe(options: StripeOptions): Promise<Server> {
  const file = path.resolve(options.folder, "stripe.json");
  mkdirSync(path.dirname(file), { recursive: true });
  const state: State = existsSync(file)
    ? (JSON.parse(readFileSync(file, "utf8")) as State)
    : { sessions: {}, intents: {}, charges: {}, refunds: {}, accounts: {}, links: {}, transfers: {}, payouts: {}, disputes: {}, transactions: [], events: [], keys: {}, deliveries: [] };
  const world = new World(state, options, () => {
    writeFileSync(`${file}.new`, JSON.stringify(state));
    renameSync(`${file}.new`, file);
  });
  const server = await serve(options.port, (call) => route(call, world));
  const timer = setInterval(() => void world.deliverDue(), 150);
  server.on("close", () => clearInterval(timer));
  return server;
}

class World {
  private busy = false;
  faults = { failNext: 0, dropWebhooks: false, duplicateWebhooks: false };
  constructor(
    readonly state: State,
    readonly options: StripeOptions,
    readonly save: () => void,
  ) {}

  id(prefix: string): string {
    return `${prefix}_${randomBytes(12).toString("hex")}`;
  }

  base(): string {
    return `http://127.0.0.1:${this.options.port}`;
  }

  get now(): number {
    return Math.floor(Date.now() / 1000);
  }

  transaction(account: string, type: string, amount: number, fee: number, source: string): Row {
    const row = { id: this.id("txn"), object: "balance_transaction", account, type, amount, fee, net: amount - fee, currency: "usd", source, status: "available", created: this.now, available_on: this.now, fee_details: fee > 0 ? [{ amount: fee, currency: "usd", type: "stripe_fee", description: "Stripe processing fees" }] : [] };
    this.state.transactions.push(row);
    return row;
  }

  balance(account: string): number {
    return this.state.transactions.filter((row) => row.account === account).reduce((sum, row) => sum + row.net, 0);
  }

  emit(type: string, object: Row, account?: string): void {
    const event = { id: this.id("evt"), object: "event", api_version: API_VERSION, created: this.now, type, livemode: false, pending_webhooks: 1, request: null, data: { object }, ...(account && { account }) };
    this.state.events.push(event);
    if (this.options.webhookUrl && !this.faults.dropWebhooks) {
      this.state.deliveries.push({ eventId: event.id, attempt: 0, dueMs: Date.now() });
      if (this.faults.duplicateWebhooks) this.state.deliveries.push({ eventId: event.id, attempt: 0, dueMs: Date.now() + 50 });
    }
  }

  sign(body: string, atSeconds = this.now): string {
    const mac = createHmac("sha256", this.options.webhookSecret).update(`${atSeconds}.${body}`).digest("hex");
    return `t=${atSeconds},v1=${mac}`;
  }

  /** Delivers what is due, one after the other; what is not taken is tried again after 0.5 s, 1 s, 2 s ... */
  async deliverDue(): Promise<void> {
    if (this.busy || !this.options.webhookUrl) return;
    this.busy = true;
    try {
      for (const delivery of [...this.state.deliveries]) {
        if (delivery.dueMs > Date.now()) continue;
        const event = this.state.events.find((candidate) => candidate.id === delivery.eventId);
        const body = JSON.stringify(event);
        const answer = await fetch(this.options.webhookUrl, {
          method: "POST",
          headers: { "content-type": "application/json", "stripe-signature": this.sign(body) },
          body,
          signal: AbortSignal.timeout(5000),
        }).catch(() => null);
        if (answer?.ok) this.state.deliveries = this.state.deliveries.filter((other) => other !== delivery);
        else {
          delivery.attempt += 1;
          delivery.dueMs = Date.now() + Math.min(500 * 2 ** (delivery.attempt - 1), 60_000);
        }
        this.save();
      }
    } finally {
      this.busy = false;
    }
  }
}

async function route(call: Call, world: World): Promise<void> {
  const { method, path: where, response } = call;
  if (where === "/") return sendHtml(response, 200, page("Stripe stand-in", `<main><h1>Stripe stand-in</h1><p>Balance of the platform: $${(world.balance(PLATFORM) / 100).toFixed(2)}</p></main>`));
  if (where.startsWith("/checkout/")) return checkoutPage(call, world);
  if (where.startsWith("/onboarding/")) return onboardingPage(call, world);
  if (where.startsWith("/_control/")) return control(call, world);
  const authorization = call.request.headers.authorization ?? "";
  if (!where.startsWith("/v1/")) return sendJson(response, 404, { error: { type: "invalid_request_error", message: `Unrecognized request URL (${method}: ${where}).` } });
  const body = (await readBody(call.request)).toString("utf8");
  const key = String(call.request.headers["idempotency-key"] ?? "");
  const scope = `${String(call.request.headers["stripe-account"] ?? "")}|${key}`;
  const digest = createHash("sha256").update(`${method} ${where}\n${body}`).digest("hex");
  if (!/^Bearer sk_test_/.test(authorization)) {
    return sendJson(response, 401, { error: { type: "invalid_request_error", message: "You did not provide a test API key." } });
  }
  if (world.faults.failNext > 0) {
    world.faults.failNext -= 1;
    return sendJson(response, 500, { error: { type: "api_error", message: "The stand-in was told to fail." } });
  }
  const kept = key && method === "POST" ? world.state.keys[scope] : undefined;
  if (kept && Date.now() - kept.atMs < KEY_LIFETIME_MS) {
    if (kept.digest !== digest) {
      return sendJson(response, 400, { error: { type: "idempotency_error", message: "Keys for idempotent requests can only be used with the same parameters they were first used with." } });
    }
    return sendJson(response, kept.status, kept.body, { "idempotent-replayed": "true", "request-id": world.id("req") });
  }
  let status = 200;
  let answer: unknown;
  try {
    answer = operate(method, where, parseForm(method === "GET" ? call.query.toString() : body), String(call.request.headers["stripe-account"] ?? PLATFORM), world);
  } catch (error) {
    if (!(error instanceof StripeError)) throw error;
    status = error.status;
    answer = { error: { type: error.type, code: error.code, message: error.message, doc_url: "", ...error.extra } };
  }
  if (method === "POST") {
    if (key) world.state.keys[scope] = { digest, status, body: answer, atMs: Date.now() };
    world.save();
  }
  sendJson(response, status, answer, { "request-id": world.id("req") });
}

/** Bracketed form fields as nested objects: a[b][0]=c. */
function parseForm(text: string): Form {
  const form: Form = {};
  for (const [name, value] of new URLSearchParams(text)) {
    const parts = name.replaceAll("]", "").split("[");
    let at = form;
    parts.forEach((part, index) => {
      if (index === parts.length - 1) at[part] = value;
      else {
        const next = at[part];
        at = typeof next === "object" ? next : (at[part] = {});
      }
    });
  }
  return form;
}

const text = (form: Form, name: string): string | undefined => (typeof form[name] === "string" ? form[name] : undefined);
const nested = (form: Form, name: string): Form => (typeof form[name] === "object" ? form[name] : {});
function amountOf(form: Form, name = "amount"): number {
  const value = Number(text(form, name));
  if (!Number.isInteger(value) || value <= 0) throw invalid(`Invalid ${name}: must be a positive integer.`);
  return value;
}

function operate(method: string, where: string, form: Form, account: string, world: World): unknown {
  const { state } = world;
  const [, , collection = "", ...rest] = where.split("/");
  const id = rest[0] ?? "";
  const route = `${method} ${collection}${rest.length === 0 ? "" : rest.length === 1 ? "/:id" : `/:id/${rest.slice(1).join("/")}`}`;
  const get = (rows: Record<string, Row>, what: string, key = id): Row => rows[key] ?? fail(missing(what, key));
  switch (route) {
    case "POST checkout/:id":
      return id === "sessions" ? createSession(form, world) : fail(missing("url", where));
    case "GET payment_intents/:id":
      return expand(get(state.intents, "payment_intent"), form, world);
    case "GET charges/:id":
      return expand(get(state.charges, "charge"), form, world);
    case "POST refunds":
      return createRefund(form, world);
    case "GET refunds/:id":
      return get(state.refunds, "refund");
    case "POST accounts":
      return createAccount(form, world);
    case "GET accounts/:id":
      return get(state.accounts, "account");
    case "POST account_links":
      return createLink(form, world);
    case "POST transfers":
      return createTransfer(form, world);
    case "GET transfers/:id":
      return get(state.transfers, "transfer");
    case "GET transfers":
      return list(Object.values(state.transfers).filter((row) => !text(form, "transfer_group") || row.transfer_group === text(form, "transfer_group")), form);
    case "POST transfers/:id/reversals":
      return reverseTransfer(get(state.transfers, "transfer"), form, world);
    case "POST payouts":
      return createPayout(form, account, world);
    case "GET payouts/:id":
      return get(state.payouts, "payout");
    case "GET disputes/:id":
      return get(state.disputes, "dispute");
    case "GET balance": {
      const amount = world.balance(account);
      return { object: "balance", livemode: false, available: [{ amount, currency: "usd", source_types: { card: amount } }], pending: [{ amount: 0, currency: "usd", source_types: { card: 0 } }] };
    }
    case "GET balance_transactions":
      return list(state.transactions.filter((row) => row.account === account).map(({ account: _, ...row }) => row as Row), form);
    case "GET events":
      return list(state.events, form);
    case "GET events/:id":
      return state.events.find((event) => event.id === id) ?? fail(missing("event", id));
  }
  if (collection === "checkout" && id === "sessions" && rest[1]) {
    const session = get(state.sessions, "checkout.session", rest[1]);
    if (method === "POST" && rest[2] === "expire") {
      if (session.status !== "open") throw invalid("Only open sessions can be expired.");
      session.status = "expired";
      world.emit("checkout.session.expired", session);
    }
    return expand(session, form, world);
  }
  throw new StripeError(404, "invalid_request_error", "url_invalid", `Unrecognized request URL (${method}: ${where}).`);
}

function fail(error: Error): never {
  throw error;
}

/** A page of a list, latest first, with cursors. */
function list(rows: Row[], form: Form): unknown {
  const ordered = [...rows].reverse();
  const limit = Math.min(100, Math.max(1, Number(text(form, "limit") ?? 10)));
  const after = text(form, "starting_after");
  const before = text(form, "ending_before");
  if (after && before) throw invalid("You may only specify one of these parameters: ending_before, starting_after.");
  const start = after ? ordered.findIndex((row) => row.id === after) + 1 : 0;
  const end = before ? ordered.findIndex((row) => row.id === before) : ordered.length;
  const from = before ? Math.max(0, end - limit) : start;
  const data = ordered.slice(from, Math.min(end, from + limit));
  return { object: "list", url: "/v1", has_more: before ? from > 0 : from + limit < ordered.length, data };
}

/** Replaces ids by objects along the paths of `expand[]`, four levels at most. */
function expand(row: Row, form: Form, { state }: World): Row {
  const all: Record<string, Record<string, Row>> = { payment_intent: state.intents, latest_charge: state.charges, charge: state.charges, refund: state.refunds, transfer: state.transfers };
  let result = row;
  for (const wanted of Object.values(nested(form, "expand"))) {
    const parts = String(wanted).split(".");
    if (parts.length > 4) throw invalid("You cannot expand more than 4 levels of a property.");
    result = expandAlong(result, parts);
  }
  return result;
  function expandAlong(at: Row, parts: string[]): Row {
    const [name, ...more] = parts;
    if (!name) return at;
    const value = at[name];
    const found = typeof value === "string" ? (name === "balance_transaction" ? state.transactions.find((entry) => entry.id === value) : all[name]?.[value]) : (value as Row | undefined);
    return found && typeof found === "object" ? { ...at, [name]: expandAlong(found, more) } : at;
  }
}

function createSession(form: Form, world: World): Row {
  const items = Object.values(nested(form, "line_items")).filter((item) => typeof item === "object");
  if (items.length === 0) throw invalid("Missing required param: line_items.", "parameter_missing");
  const total = items.reduce((sum, item) => sum + Number(text(item, "quantity") ?? 1) * amountOf(nested(item, "price_data"), "unit_amount"), 0);
  if (total < 50) throw new StripeError(400, "invalid_request_error", "amount_too_small", "The Checkout Session's total amount must convert to at least 50 cents.");
  const id = world.id("cs_test");
  const session: Row = {
    id,
    object: "checkout.session",
    mode: text(form, "mode") ?? "payment",
    status: "open",
    payment_status: "unpaid",
    amount_total: total,
    amount_subtotal: total,
    currency: "usd",
    client_reference_id: text(form, "client_reference_id") ?? null,
    metadata: nested(form, "metadata"),
    payment_intent: null,
    success_url: text(form, "success_url") ?? "",
    cancel_url: text(form, "cancel_url") ?? "",
    url: `${world.base()}/checkout/${id}`,
    created: world.now,
    expires_at: world.now + 86_400,
    livemode: false,
    intent_metadata: nested(nested(form, "payment_intent_data"), "metadata"),
  };
  world.state.sessions[id] = session;
  return session;
}

/** Pays an open session with a card. A decline leaves it open. */
function paySession(session: Row, card: string, world: World, authenticated = false): { error?: string; authenticate?: boolean } {
  const { state } = world;
  if (session.status !== "open") return { error: "This payment is closed." };
  const amount = session.amount_total as number;
  const intentId = (session.payment_intent as string | null) ?? world.id("pi");
  const intent: Row = (state.intents[intentId] ??= { id: intentId, object: "payment_intent", amount, currency: "usd", status: "requires_payment_method", metadata: session.intent_metadata, latest_charge: null, last_payment_error: null, created: world.now });
  session.payment_intent = intentId;
  const decline = DECLINES[card];
  if (decline) {
    intent.last_payment_error = { type: "card_error", code: decline[0], decline_code: decline[1], message: decline[2] };
    world.emit("payment_intent.payment_failed", intent);
    return { error: decline[2] };
  }
  if (!/^4\d{15}$/.test(card)) return { error: "Your card number is invalid." };
  if (card === CARD_3DS && !authenticated) {
    intent.status = "requires_action";
    return { authenticate: true };
  }
  const chargeId = world.id("ch");
  const transaction = world.transaction(PLATFORM, "charge", amount, feeOf(amount), chargeId);
  const charge: Row = { id: chargeId, object: "charge", amount, amount_refunded: 0, refunded: false, paid: true, status: "succeeded", currency: "usd", payment_intent: intentId, balance_transaction: transaction.id, metadata: session.intent_metadata, disputed: false, created: world.now };
  state.charges[chargeId] = charge;
  Object.assign(intent, { status: "succeeded", latest_charge: chargeId, amount_received: amount, last_payment_error: null });
  Object.assign(session, { status: "complete", payment_status: "paid" });
  world.emit("payment_intent.succeeded", intent);
  world.emit("charge.succeeded", charge);
  world.emit("checkout.session.completed", session);
  if (card === CARD_DISPUTED) {
    const dispute: Row = { id: world.id("dp"), object: "dispute", amount, charge: chargeId, currency: "usd", reason: "fraudulent", status: "needs_response", created: world.now };
    state.disputes[dispute.id] = dispute;
    charge.disputed = true;
    world.transaction(PLATFORM, "adjustment", -amount, 0, dispute.id);
    world.emit("charge.dispute.created", dispute);
    world.emit("charge.dispute.funds_withdrawn", dispute);
  }
  return {};
}

function createRefund(form: Form, world: World): Row {
  const { state } = world;
  const intent = text(form, "payment_intent");
  const chargeId = text(form, "charge") ?? (intent ? (state.intents[intent]?.latest_charge as string | undefined) : undefined);
  const charge = chargeId ? state.charges[chargeId] : undefined;
  if (!charge) throw missing("charge", chargeId ?? intent ?? "");
  const left = (charge.amount as number) - (charge.amount_refunded as number);
  const amount = text(form, "amount") ? amountOf(form) : left;
  if (amount > left || left === 0) throw invalid(`Refund amount ($${amount / 100}) is greater than unrefunded amount on charge ($${left / 100})`, left === 0 ? "charge_already_refunded" : "amount_too_large");
  if (world.balance(PLATFORM) < amount) throw invalid("Insufficient funds in your Stripe balance to refund this amount.", "balance_insufficient");
  const refund: Row = { id: world.id("re"), object: "refund", amount, charge: charge.id, payment_intent: charge.payment_intent, currency: "usd", status: "succeeded", metadata: nested(form, "metadata"), created: world.now };
  refund.balance_transaction = world.transaction(PLATFORM, "refund", -amount, 0, refund.id).id;
  state.refunds[refund.id] = refund;
  charge.amount_refunded = (charge.amount_refunded as number) + amount;
  charge.refunded = charge.amount_refunded === charge.amount;
  world.emit("charge.refunded", charge);
  world.emit("refund.created", refund);
  return refund;
}

function createAccount(form: Form, world: World): Row {
  const account: Row = {
    id: world.id("acct"),
    object: "account",
    type: text(form, "type") ?? "express",
    email: text(form, "email") ?? null,
    country: "US",
    default_currency: "usd",
    charges_enabled: false,
    payouts_enabled: false,
    details_submitted: false,
    capabilities: { transfers: "inactive" },
    requirements: { currently_due: ["external_account", "tos_acceptance.date"], eventually_due: [], past_due: [], disabled_reason: "requirements.past_due" },
    metadata: nested(form, "metadata"),
    created: world.now,
    bank: null,
  };
  world.state.accounts[account.id] = account;
  return account;
}

function createLink(form: Form, world: World): unknown {
  const account = text(form, "account") ?? "";
  if (!world.state.accounts[account]) throw missing("account", account);
  const token = randomBytes(16).toString("hex");
  world.state.links[token] = { account, returnUrl: text(form, "return_url") ?? "", used: false };
  return { object: "account_link", created: world.now, expires_at: world.now + 300, url: `${world.base()}/onboarding/${token}` };
}

function completeOnboarding(accountId: string, bank: string, world: World): boolean {
  const account = world.state.accounts[accountId];
  if (!account) return false;
  Object.assign(account, { payouts_enabled: true, details_submitted: true, capabilities: { transfers: "active" }, requirements: { currently_due: [], eventually_due: [], past_due: [], disabled_reason: null }, bank });
  world.emit("account.updated", account, accountId);
  return true;
}

function createTransfer(form: Form, world: World): Row {
  const { state } = world;
  const amount = amountOf(form);
  const destination = text(form, "destination") ?? "";
  const account = state.accounts[destination];
  if (!account) throw missing("destination", destination);
  if ((account.capabilities as { transfers: string }).transfers !== "active") {
    throw invalid("Your destination account needs to have at least one of the following capabilities enabled: transfers", "insufficient_capabilities_for_transfer");
  }
  if (world.balance(PLATFORM) < amount) throw invalid("You have insufficient available funds in your Stripe account.", "balance_insufficient");
  const transfer: Row = { id: world.id("tr"), object: "transfer", amount, amount_reversed: 0, reversed: false, currency: "usd", destination, transfer_group: text(form, "transfer_group") ?? null, metadata: nested(form, "metadata"), created: world.now };
  transfer.balance_transaction = world.transaction(PLATFORM, "transfer", -amount, 0, transfer.id).id;
  world.transaction(destination, "payment", amount, 0, transfer.id);
  state.transfers[transfer.id] = transfer;
  world.emit("transfer.created", transfer);
  return transfer;
}

function reverseTransfer(transfer: Row, form: Form, world: World): Row {
  const left = (transfer.amount as number) - (transfer.amount_reversed as number);
  const amount = text(form, "amount") ? amountOf(form) : left;
  if (amount > left) throw invalid("Reversal amount is greater than the remaining amount of the transfer.", "amount_too_large");
  if (world.balance(transfer.destination as string) < amount) throw invalid("The destination account does not have sufficient funds.", "balance_insufficient");
  transfer.amount_reversed = (transfer.amount_reversed as number) + amount;
  transfer.reversed = transfer.amount_reversed === transfer.amount;
  const reversal: Row = { id: world.id("trr"), object: "transfer_reversal", amount, currency: "usd", transfer: transfer.id, metadata: nested(form, "metadata"), created: world.now };
  world.transaction(PLATFORM, "transfer_refund", amount, 0, reversal.id);
  world.transaction(transfer.destination as string, "payment_refund", -amount, 0, reversal.id);
  world.emit("transfer.reversed", transfer);
  return reversal;
}

function createPayout(form: Form, account: string, world: World): Row {
  const amount = amountOf(form);
  if (world.balance(account) < amount) throw invalid("You have insufficient funds in your Stripe account for this payout.", "balance_insufficient");
  const payout: Row = { id: world.id("po"), object: "payout", amount, currency: "usd", status: "pending", arrival_date: world.now, failure_code: null, failure_message: null, metadata: nested(form, "metadata"), created: world.now, account };
  world.state.payouts[payout.id] = payout;
  world.transaction(account, "payout", -amount, 0, payout.id);
  world.emit("payout.created", payout, account);
  setTimeout(() => settlePayout(payout, account, world), 400);
  return payout;
}

/** The bank takes the payout, or sends it back. */
function settlePayout(payout: Row, account: string, world: World): void {
  if (payout.status !== "pending") return;
  const failure = BANK_FAILS[String(world.state.accounts[account]?.bank ?? "")];
  if (failure) {
    Object.assign(payout, { status: "failed", failure_code: failure[0], failure_message: failure[1] });
    world.transaction(account, "payout_failure", payout.amount as number, 0, payout.id);
    world.emit("payout.failed", payout, account);
  } else {
    payout.status = "paid";
    world.emit("payout.paid", payout, account);
  }
  world.save();
}

const digits = (value: string | null) => (value ?? "").replace(/\D/g, "");

async function checkoutPage(call: Call, world: World): Promise<void> {
  const { method, path: where, response } = call;
  const [, , id = "", step] = where.split("/");
  const session = world.state.sessions[id];
  if (!session) return sendHtml(response, 404, page("Not found", `<main class="narrow"><h1>No such payment</h1></main>`));
  const fields = method === "POST" ? new URLSearchParams((await readBody(call.request)).toString("utf8")) : null;
  if (fields && (step === "pay" || step === "authenticate")) {
    const card = digits(fields.get("card"));
    const outcome = step === "authenticate" && fields.get("answer") === "fail" ? { error: "We are unable to authenticate your payment method." } : paySession(session, card, world, step === "authenticate");
    world.save();
    if (outcome.authenticate) return sendHtml(response, 200, authenticatePage(session, card));
    if (outcome.error) return sendHtml(response, 402, payPage(session, outcome.error));
    return redirect(response, String(session.success_url).replace("{CHECKOUT_SESSION_ID}", id));
  }
  if (session.status === "complete") return redirect(response, String(session.success_url).replace("{CHECKOUT_SESSION_ID}", id));
  sendHtml(response, 200, payPage(session));
}

function redirect(response: ServerResponse, url: string): void {
  response.writeHead(303, { location: url }).end();
}

function payPage(session: Row, error?: string): string {
  const amount = `$${((session.amount_total as number) / 100).toFixed(2)}`;
  return page(
    "Pay",
    `<main class="narrow"><h1>Pay ${amount}</h1><form class="card" method="post" action="/checkout/${session.id}/pay">
${error ? `<p class="bad" role="alert">${escapeHtml(error)}</p>` : ""}
<label for="card">Card number</label><input id="card" name="card" inputmode="numeric" autocomplete="cc-number" required placeholder="4242 4242 4242 4242">
<label for="expiry">Expiry</label><input id="expiry" name="expiry" autocomplete="cc-exp" placeholder="12 / 34" required>
<label for="cvc">Security code</label><input id="cvc" name="cvc" inputmode="numeric" autocomplete="cc-csc" placeholder="123" required>
<p><button type="submit">Pay ${amount}</button> <a class="button quiet" href="${escapeHtml(String(session.cancel_url))}">Cancel</a></p>
<p class="muted">4242 4242 4242 4242 succeeds, 4000 0000 0000 0002 is declined, 4000 0027 6000 3184 asks for confirmation.</p></form></main>`,
  );
}

function authenticatePage(session: Row, card: string): string {
  return page(
    "Confirm",
    `<main class="narrow"><h1>Your bank asks</h1><form class="card" method="post" action="/checkout/${session.id}/authenticate"><input type="hidden" name="card" value="${escapeHtml(card)}">
<p>Do you confirm this payment?</p><p><button name="answer" value="complete">Confirm</button> <button class="quiet" name="answer" value="fail">Refuse</button></p></form></main>`,
  );
}

async function onboardingPage(call: Call, world: World): Promise<void> {
  const { method, path: where, response } = call;
  const link = world.state.links[where.split("/")[2] ?? ""];
  if (!link || link.used) return sendHtml(response, 410, page("Used", `<main class="narrow"><h1>This link was used</h1><p>Go back and ask for a new one.</p></main>`));
  if (method === "POST") {
    const fields = new URLSearchParams((await readBody(call.request)).toString("utf8"));
    link.used = true;
    completeOnboarding(link.account, digits(fields.get("bank")), world);
    world.save();
    return redirect(response, link.returnUrl);
  }
  sendHtml(
    response,
    200,
    page(
      "Bank account",
      `<main class="narrow"><h1>Where should the money go?</h1><form class="card" method="post"><label for="bank">Bank account</label><select id="bank" name="bank"><option value="000123456789">000123456789: payouts arrive</option><option value="000111111116">000111111116: no such account</option><option value="000111111113">000111111113: account closed</option></select>
<p><button type="submit">Finish onboarding</button></p></form></main>`,
    ),
  );
}

/** What tests and the seed drive. */
async function control(call: Call, world: World): Promise<void> {
  const { path: where, response } = call;
  const input = JSON.parse((await readBody(call.request)).toString("utf8") || "{}") as Record<string, unknown>;
  const what = where.slice("/_control/".length);
  const done = (value: unknown = {}) => {
    world.save();
    sendJson(response, 200, value);
  };
  if (what === "pay-session") {
    const session = world.state.sessions[String(input.id)];
    if (!session) return sendJson(response, 404, { error: "no such session" });
    const outcome = paySession(session, digits(String(input.card ?? "4242424242424242")), world, true);
    return outcome.error ? sendJson(response, 402, outcome) : done(session);
  }
  if (what === "complete-onboarding") {
    return completeOnboarding(String(input.account), String(input.bank ?? "000123456789"), world) ? done() : sendJson(response, 404, { error: "no such account" });
  }
  if (what === "fault") {
    Object.assign(world.faults, input);
    return done(world.faults);
  }
  if (what === "webhooks/flush") {
    for (const delivery of world.state.deliveries) delivery.dueMs = 0;
    await world.deliverDue();
    return done({ left: world.state.deliveries.length });
  }
  if (what === "webhooks/resend") {
    world.state.deliveries.push(...world.state.events.map((event) => ({ eventId: event.id, attempt: 0, dueMs: Date.now() })));
    return done();
  }
  if (what === "balance") return done({ platform: world.balance(PLATFORM), transactions: world.state.transactions.length });
  sendJson(response, 404, { error: "no such control" });
}
