import { brandOf, cardOfMethod, outcomeOf } from "./cards";
import { StripeError, badParameter, invalid, missingParameter, noSuch } from "./errors";
import { CHARGE_CENTS_MIN, Params } from "./form";
import {
  EMPTY_ADDRESS,
  type CaptureMethod,
  type Charge,
  type Intent,
  type LineItem,
  type PaymentError,
  type PaymentMethod,
  type Refund,
  type Session,
} from "./objects";
import { openDispute } from "./disputes";
import { cardFeeCents, type World } from "./world";

const SESSION_SECONDS = 86_400;
const SESSION_SECONDS_MIN = 1800;
const CAPTURES = ["automatic", "automatic_async", "manual"] as const;
const CANCEL_REASONS = ["duplicate", "fraudulent", "requested_by_customer", "abandoned"] as const;
const REFUND_REASONS = ["duplicate", "fraudulent", "requested_by_customer"] as const;
const REFUND_SETTLES_MS = 200;

type IntentSeed = Pick<
  Intent,
  "amount" | "metadata" | "description" | "transfer_group" | "receipt_email" | "customer" | "capture_method"
> & { account: string; session: string | null };

function newIntent(world: World, { account, session, ...seed }: IntentSeed): Intent {
  const kept = world.kept("pi", account);
  return world.save(world.intents, {
    ...kept,
    ...seed,
    object: "payment_intent",
    amount_capturable: 0,
    amount_received: 0,
    status: "requires_payment_method",
    latest_charge: null,
    last_payment_error: null,
    payment_method: null,
    next_action: null,
    canceled_at: null,
    cancellation_reason: null,
    _card: null,
    _session: session,
    _returnUrl: null,
    rest: {
      currency: "usd",
      allowed_payment_method_types: null,
      amount_details: { tip: {} },
      application: null,
      application_fee_amount: null,
      automatic_payment_methods: null,
      client_secret: `${kept.id}_secret_${world.id("s").slice(2)}`,
      confirmation_method: "automatic",
      customer_account: null,
      excluded_payment_method_types: null,
      livemode: false,
      managed_payments: null,
      on_behalf_of: null,
      payment_method_configuration_details: null,
      payment_method_options: {},
      payment_method_types: ["card"],
      payment_record: null,
      processing: null,
      review: null,
      setup_future_usage: null,
      shipping: null,
      source: null,
      statement_descriptor: null,
      statement_descriptor_suffix: null,
      transfer_data: null,
    },
  });
}

/** Payment methods of the API: tokens like pm_card_visa become a method of their own on first use. */
export function newMethod(
  world: World,
  card: string,
  account: string,
  expiry = { month: 12, year: 2034 },
): PaymentMethod {
  return world.save(world.methods, {
    ...world.kept("pm", account),
    object: "payment_method",
    type: "card",
    customer: null,
    metadata: {},
    _card: card,
    rest: {
      allow_redisplay: "unspecified",
      billing_details: { address: EMPTY_ADDRESS, email: null, name: null, phone: null, tax_id: null },
      card: {
        brand: brandOf(card),
        checks: { address_line1_check: null, address_postal_code_check: null, cvc_check: "pass" },
        country: "US",
        display_brand: brandOf(card),
        exp_month: expiry.month,
        exp_year: expiry.year,
        fingerprint: card.slice(-12),
        funding: "credit",
        generated_from: null,
        last4: card.slice(-4),
        networks: { available: [brandOf(card)], preferred: null },
        regulated_status: "unregulated",
        three_d_secure_usage: { supported: true },
        wallet: null,
      },
      customer_account: null,
      livemode: false,
    },
  });
}

function findMethod(world: World, id: string, account: string): PaymentMethod {
  const card = cardOfMethod(id);
  return card
    ? newMethod(world, card, account)
    : world.get(world.methods, "PaymentMethod", id, account, "payment_method");
}

export function createIntent(world: World, params: Params, account: string): Intent {
  const amount = params.amount();
  params.currency();
  if (amount < CHARGE_CENTS_MIN)
    throw invalid("Amount must be at least $0.50 usd", "amount_too_small", "amount");
  const customer = params.optional("customer");
  if (customer) world.get(world.customers, "customer", customer, account, "customer");
  const intent = newIntent(world, {
    account,
    session: null,
    amount,
    customer,
    metadata: params.metadata(),
    description: params.optional("description"),
    transfer_group: params.optional("transfer_group"),
    receipt_email: params.optional("receipt_email"),
    capture_method: params.choice("capture_method", CAPTURES) ?? "automatic",
  });
  world.emit("payment_intent.created", intent, { account });
  const method = params.optional("payment_method");
  if (method) chooseMethod(world, intent, method);
  return params.flag("confirm") ? confirmIntent(world, intent, params) : intent;
}

function chooseMethod(world: World, intent: Intent, id: string): void {
  const method = findMethod(world, id, intent._account);
  Object.assign(intent, { payment_method: method.id, _card: method._card, status: "requires_confirmation" });
  world.save(world.intents, intent);
}

export function updateIntent(world: World, intent: Intent, params: Params): Intent {
  const amount = params.optionalAmount();
  if (amount !== undefined) {
    requireStatus(intent, ["requires_payment_method", "requires_confirmation", "requires_action"], "updated");
    if (amount < CHARGE_CENTS_MIN)
      throw invalid("Amount must be at least $0.50 usd", "amount_too_small", "amount");
    intent.amount = amount;
  }
  if (params.has("metadata")) intent.metadata = params.metadata(intent.metadata);
  for (const field of ["description", "transfer_group", "receipt_email"] as const)
    if (params.has(field)) intent[field] = params.optional(field);
  const method = params.optional("payment_method");
  if (method) chooseMethod(world, intent, method);
  return world.save(world.intents, intent);
}

function requireStatus(intent: Intent, allowed: Intent["status"][], verb: string): void {
  if (allowed.includes(intent.status)) return;
  throw new StripeError(400, {
    type: "invalid_request_error",
    code: "payment_intent_unexpected_state",
    message: `This PaymentIntent could not be ${verb} because it has a status of ${intent.status}. Only a PaymentIntent with one of the following statuses may be ${verb}: ${allowed.join(", ")}.`,
    payment_intent: intent,
  });
}

export function confirmIntent(world: World, intent: Intent, params: Params): Intent {
  requireStatus(intent, ["requires_payment_method", "requires_confirmation", "requires_action"], "confirmed");
  const method = params.optional("payment_method");
  if (method) chooseMethod(world, intent, method);
  if (params.has("return_url")) intent._returnUrl = params.optional("return_url");
  if (!intent._card) {
    throw invalid(
      "You cannot confirm this PaymentIntent because it's missing a payment method.",
      "payment_intent_unexpected_state",
    );
  }
  const result = chargeCard(world, intent, false);
  if (result === "declined") {
    const error = intent.last_payment_error;
    throw new StripeError(402, { type: "card_error", message: "", ...error, payment_intent: intent });
  }
  return intent;
}

/** Charges the intent's card: the heart of every payment, by API or by page. */
export function chargeCard(
  world: World,
  intent: Intent,
  isAuthenticated: boolean,
): "paid" | "declined" | "authenticate" {
  const card = intent._card ?? "";
  const outcome = outcomeOf(card);
  if (outcome.kind === "authenticates" && !isAuthenticated) {
    const url = `${world.baseUrl}/authenticate/${intent.id}`;
    intent.status = "requires_action";
    intent.next_action =
      intent._returnUrl !== null || intent._session !== null
        ? { type: "redirect_to_url", redirect_to_url: { return_url: intent._returnUrl, url } }
        : { type: "use_stripe_sdk", use_stripe_sdk: { type: "three_d_secure_redirect", stripe_js: url } };
    world.save(world.intents, intent);
    world.emit("payment_intent.requires_action", intent, { account: intent._account });
    return "authenticate";
  }
  intent.next_action = null;
  if (outcome.kind === "declines") {
    const charge = newCharge(world, intent, {
      code: outcome.code,
      message: outcome.message,
      declineCode: outcome.declineCode,
    });
    failPayment(world, intent, {
      type: "card_error",
      code: outcome.code,
      decline_code: outcome.declineCode,
      message: outcome.message,
      charge: charge.id,
      doc_url: `https://stripe.com/docs/error-codes/${outcome.code.replaceAll("_", "-")}`,
    });
    world.emit("charge.failed", charge, { account: intent._account });
    return "declined";
  }
  const charge = newCharge(world, intent, null);
  intent.latest_charge = charge.id;
  intent.last_payment_error = null;
  if (intent.capture_method === "manual") {
    Object.assign(intent, { status: "requires_capture", amount_capturable: intent.amount });
    world.save(world.intents, intent);
    world.emit("payment_intent.amount_capturable_updated", intent, { account: intent._account });
    return "paid";
  }
  capture(world, intent, charge, intent.amount);
  return "paid";
}

/** Back to where another card can be tried. */
export function failPayment(world: World, intent: Intent, error: PaymentError): void {
  Object.assign(intent, {
    status: "requires_payment_method",
    last_payment_error: error,
    payment_method: null,
    next_action: null,
    _card: null,
  });
  if (error.charge) intent.latest_charge = error.charge;
  world.save(world.intents, intent);
  world.emit("payment_intent.payment_failed", intent, { account: intent._account });
}

function newCharge(
  world: World,
  intent: Intent,
  failure: { code: string; declineCode: string; message: string } | null,
): Charge {
  const card = intent._card ?? "";
  const kept = world.kept("ch", intent._account);
  return world.save(world.charges, {
    ...kept,
    object: "charge",
    amount: intent.amount,
    amount_captured: 0,
    amount_refunded: 0,
    captured: false,
    paid: failure === null,
    refunded: false,
    disputed: false,
    status: failure === null ? "succeeded" : "failed",
    balance_transaction: null,
    payment_intent: intent.id,
    payment_method: intent.payment_method,
    failure_code: failure?.code ?? null,
    failure_message: failure?.message ?? null,
    source_transfer: null,
    transfer_group: intent.transfer_group ?? (failure ? null : `group_${intent.id}`),
    description: intent.description,
    metadata: { ...intent.metadata },
    receipt_url: failure ? null : `${world.baseUrl}/receipts/${kept.id}`,
    _card: card,
    _transferred: 0,
    rest: {
      ...CHARGE_REST,
      customer: intent.customer,
      receipt_email: intent.receipt_email,
      outcome: {
        advice_code: null,
        network_advice_code: null,
        network_decline_code: null,
        network_status: failure ? "declined_by_network" : "approved_by_network",
        reason: failure?.declineCode ?? null,
        risk_level: "normal",
        seller_message: failure
          ? "The bank did not return any further details with this decline."
          : "Payment complete.",
        type: failure ? "issuer_declined" : "authorized",
      },
      payment_method_details: {
        type: "card",
        card: {
          amount_authorized: failure ? null : intent.amount,
          authorization_code: null,
          brand: brandOf(card),
          checks: {
            address_line1_check: null,
            address_postal_code_check: null,
            cvc_check: failure?.code === "incorrect_cvc" ? "fail" : "pass",
          },
          country: "US",
          electronic_commerce_indicator: null,
          exp_month: 12,
          exp_year: 2034,
          fingerprint: card.slice(-12),
          funding: "credit",
          installments: null,
          last4: card.slice(-4),
          mandate: null,
          network: brandOf(card),
          network_transaction_id: null,
          regulated_status: "unregulated",
          three_d_secure: null,
          transaction_link_id: null,
          wallet: null,
        },
      },
    },
  });
}

export const CHARGE_REST = {
  currency: "usd",
  application: null,
  application_fee: null,
  application_fee_amount: null,
  billing_details: { address: EMPTY_ADDRESS, email: null, name: null, phone: null, tax_id: null },
  calculated_statement_descriptor: "MERESTONE",
  customer: null,
  failure_balance_transaction: null,
  fraud_details: {},
  livemode: false,
  on_behalf_of: null,
  outcome: null,
  payment_method_details: null,
  receipt_email: null,
  receipt_number: null,
  review: null,
  shipping: null,
  source: null,
  statement_descriptor: null,
  statement_descriptor_suffix: null,
  transfer_data: null,
} as const;

function capture(world: World, intent: Intent, charge: Charge, amount: number): void {
  const account = intent._account;
  const outcome = outcomeOf(charge._card ?? "");
  const bypasses = outcome.kind === "succeeds" && outcome.bypassesPending === true;
  const transaction = world.book(account, "charge", amount, charge.id, {
    fee: cardFeeCents(amount),
    availableAtMs: world.clock.nowMs() + (bypasses ? 0 : world.settings.settleMs),
  });
  Object.assign(charge, { amount_captured: amount, captured: true, balance_transaction: transaction.id });
  Object.assign(intent, { status: "succeeded", amount_received: amount, amount_capturable: 0 });
  world.save(world.charges, charge);
  world.save(world.intents, intent);
  world.emit("charge.succeeded", charge, { account });
  world.emit("payment_intent.succeeded", intent, { account });
  if (outcome.kind === "succeeds" && outcome.disputed) openDispute(world, charge);
}

export function captureIntent(world: World, intent: Intent, params: Params): Intent {
  const amount = params.optionalAmount("amount_to_capture") ?? intent.amount_capturable;
  requireStatus(intent, ["requires_capture"], "captured");
  const charge = world.charges.find(intent.latest_charge ?? "");
  if (!charge) throw noSuch("charge", intent.latest_charge ?? "");
  if (amount > intent.amount_capturable)
    throw invalid(
      `The amount you tried to capture exceeds the ${intent.amount_capturable} that are capturable.`,
      "amount_too_large",
      "amount_to_capture",
    );
  capture(world, intent, charge, amount);
  if (amount < charge.amount) charge.amount_refunded = charge.amount - amount; // the rest of the hold is let go
  world.save(world.charges, charge);
  return intent;
}

export function cancelIntent(world: World, intent: Intent, params: Params): Intent {
  requireStatus(
    intent,
    ["requires_payment_method", "requires_capture", "requires_confirmation", "requires_action", "processing"],
    "canceled",
  );
  const reason = params.choice("cancellation_reason", CANCEL_REASONS) ?? null;
  Object.assign(intent, {
    status: "canceled",
    canceled_at: world.clock.nowSeconds(),
    cancellation_reason: reason,
    amount_capturable: 0,
    next_action: null,
  });
  world.save(world.intents, intent);
  world.emit("payment_intent.canceled", intent, { account: intent._account });
  return intent;
}

export function createSession(world: World, params: Params, account: string): Session {
  const mode = params.text("mode") ?? "payment";
  if (mode !== "payment")
    throw badParameter(
      "This stand-in only takes one-time payments (mode=payment).",
      "mode",
      "parameter_invalid_enum",
    );
  const items = params.items("line_items").map((item) => readItem(world, item));
  if (items.length === 0) throw missingParameter("line_items");
  const successUrl = params.required("success_url");
  const total = items.reduce((sum, item) => sum + item.amount_total, 0);
  if (total < CHARGE_CENTS_MIN)
    throw invalid(
      "The Checkout Session's total amount must convert to at least 50 cents.",
      "amount_too_small",
    );
  const nowSeconds = world.clock.nowSeconds();
  const expires = params.integer("expires_at") ?? nowSeconds + SESSION_SECONDS;
  if (expires < nowSeconds + SESSION_SECONDS_MIN || expires > nowSeconds + SESSION_SECONDS) {
    throw badParameter(
      "The `expires_at` timestamp must be between 30 minutes and 24 hours from Checkout Session creation.",
      "expires_at",
      "parameter_invalid_integer",
    );
  }
  const kept = world.kept("cs_test", account);
  const intent = params.nested("payment_intent_data");
  const session = world.save(world.sessions, {
    ...kept,
    object: "checkout.session",
    status: "open",
    payment_status: "unpaid",
    amount_total: total,
    payment_intent: null,
    success_url: successUrl,
    cancel_url: params.optional("cancel_url"),
    customer: params.optional("customer"),
    expires_at: expires,
    url: `${world.baseUrl}/checkout/${kept.id}`,
    metadata: params.metadata(),
    _items: items,
    _intent: {
      metadata: intent.metadata(),
      description: intent.optional("description"),
      transfer_group: intent.optional("transfer_group"),
      receipt_email: intent.optional("receipt_email"),
      capture_method: intent.choice("capture_method", CAPTURES) ?? ("automatic" satisfies CaptureMethod),
    },
    _error: null,
    rest: {
      adaptive_pricing: { enabled: false },
      after_expiration: null,
      allow_promotion_codes: null,
      allowed_payment_method_types: null,
      amount_subtotal: total,
      automatic_tax: { enabled: false, liability: null, provider: null, status: null },
      billing_address_collection: null,
      client_reference_id: params.optional("client_reference_id"),
      client_secret: null,
      collected_information: null,
      consent: null,
      consent_collection: null,
      currency: "usd",
      currency_conversion: null,
      custom_fields: [],
      custom_text: {
        after_submit: null,
        shipping_address: null,
        submit: null,
        terms_of_service_acceptance: null,
      },
      customer_account: null,
      customer_creation: "if_required",
      customer_details: null,
      customer_email: params.optional("customer_email"),
      discounts: [],
      integration_identifier: null,
      invoice: null,
      invoice_creation: null,
      livemode: false,
      locale: null,
      managed_payments: null,
      mode: "payment",
      origin_context: null,
      payment_link: null,
      payment_method_collection: "if_required",
      payment_method_configuration_details: null,
      payment_method_options: {},
      payment_method_types: ["card"],
      permissions: null,
      phone_number_collection: { enabled: false },
      recovered_from: null,
      saved_payment_method_options: null,
      setup_intent: null,
      shipping_address_collection: null,
      shipping_cost: null,
      shipping_options: [],
      submit_type: params.optional("submit_type"),
      subscription: null,
      total_details: { amount_discount: 0, amount_shipping: 0, amount_tax: 0 },
      ui_mode: "hosted_page",
      wallet_options: null,
    },
  });
  world.later("expire-session", session.id, expires * 1000 - world.clock.nowMs());
  return session;
}

function readItem(world: World, item: Params): LineItem {
  const quantity = item.integer("quantity") ?? 1;
  if (quantity < 1)
    throw badParameter("Quantity must be at least 1.", "line_items[quantity]", "parameter_invalid_integer");
  const price = item.nested("price_data");
  if (!item.has("price_data")) throw missingParameter("line_items[0][price_data]");
  price.currency();
  const unit = price.amount("unit_amount");
  const name = price.nested("product_data").required("name");
  const total = unit * quantity;
  return {
    id: world.id("li"),
    object: "item",
    amount_total: total,
    description: name,
    quantity,
    rest: {
      adjustable_quantity: null,
      amount_discount: 0,
      amount_subtotal: total,
      amount_tax: 0,
      currency: "usd",
      metadata: {},
      price: { id: world.id("price"), object: "price", unit_amount: unit, currency: "usd", type: "one_time" },
    },
  };
}

export function expireSession(world: World, session: Session): Session {
  if (session.status !== "open")
    throw invalid(
      'Only Checkout Sessions with a status in ["open"] can be expired.',
      "resource_invalid_state",
    );
  Object.assign(session, { status: "expired", url: null });
  world.timers.delete(`expire-session:${session.id}`);
  const intent = world.intents.find(session.payment_intent ?? "");
  if (intent) cancelIntent(world, intent, new Params({ cancellation_reason: "abandoned" }));
  world.save(world.sessions, session);
  world.emit("checkout.session.expired", session, { account: session._account });
  return session;
}

export type Paid =
  | { result: "paid" }
  | { result: "authenticate"; intent: Intent }
  | { result: "declined"; message: string; code: string }
  | { result: "closed" };

/** What the checkout page does: pays an open session with a card. A decline leaves it open. */
export function paySession(world: World, session: Session, card: string, isAuthenticated = false): Paid {
  if (session.status !== "open") return { result: "closed" };
  const account = session._account;
  let intent = world.intents.find(session.payment_intent ?? "");
  if (!intent) {
    intent = newIntent(world, {
      account,
      session: session.id,
      amount: session.amount_total,
      customer: session.customer,
      ...session._intent,
    });
    session.payment_intent = intent.id;
    world.save(world.sessions, session);
    world.emit("payment_intent.created", intent, { account });
  }
  if (!isAuthenticated || intent.status !== "requires_action") {
    intent.payment_method = newMethod(world, card, account).id;
    intent._card = card;
  }
  const result = chargeCard(world, intent, isAuthenticated);
  if (result === "authenticate") return { result, intent };
  if (result === "declined")
    return {
      result,
      message: intent.last_payment_error?.message ?? "",
      code: intent.last_payment_error?.decline_code ?? "",
    };
  const wasManual = intent.status === "requires_capture";
  Object.assign(session, {
    status: "complete",
    payment_status: wasManual ? "unpaid" : "paid",
    url: null,
    _error: null,
  });
  session.rest = {
    ...session.rest,
    customer_details: {
      address: EMPTY_ADDRESS,
      business_name: null,
      email: session.rest.customer_email,
      individual_name: null,
      name: null,
      phone: null,
      tax_exempt: "none",
      tax_ids: [],
    },
  };
  world.timers.delete(`expire-session:${session.id}`);
  world.save(world.sessions, session);
  world.emit("checkout.session.completed", session, { account });
  return { result: "paid" };
}

export function createRefund(world: World, params: Params, account: string): Refund {
  const intentId = params.optional("payment_intent");
  const intent = intentId
    ? world.get(world.intents, "payment_intent", intentId, account, "payment_intent")
    : null;
  const chargeId = params.optional("charge") ?? intent?.latest_charge;
  if (!chargeId)
    throw intent
      ? invalid(
          `This PaymentIntent (${intent.id}) does not have a successful charge to refund.`,
          "payment_intent_unexpected_state",
        )
      : missingParameter("charge");
  const charge = world.get(world.charges, "charge", chargeId, account, "charge");
  if (charge.status !== "succeeded" || !charge.captured)
    throw invalid(`Charge ${charge.id} was not successful and cannot be refunded.`, "charge_not_refundable");
  const left = charge.amount - charge.amount_refunded;
  if (left === 0)
    throw new StripeError(400, {
      type: "invalid_request_error",
      code: "charge_already_refunded",
      message: `Charge ${charge.id} has already been refunded.`,
    });
  if (charge.disputed && !isRefundable(world, charge))
    throw new StripeError(400, {
      type: "invalid_request_error",
      code: "charge_disputed",
      message: `Charge ${charge.id} has been charged back; cannot issue a refund.`,
    });
  const amount = params.optionalAmount() ?? left;
  if (amount > left)
    throw invalid(
      `Refund amount ($${(amount / 100).toFixed(2)}) is greater than unrefunded amount on charge ($${(left / 100).toFixed(2)})`,
      undefined,
      "amount",
    );
  const reason = params.choice("reason", REFUND_REASONS) ?? null;
  const { available, pending } = world.balance(account);
  // The money of a charge that is still pending goes back out of what is pending.
  const booked = world.transactions.find(charge.balance_transaction ?? "");
  const isPending = booked !== undefined && !world.isAvailable(booked);
  if ((isPending ? available + pending : available) < amount) {
    throw invalid("Insufficient funds in your Stripe balance to refund this amount.", "balance_insufficient");
  }
  const outcome = outcomeOf(charge._card ?? "");
  const fate = outcome.kind === "succeeds" ? outcome.refund : undefined;
  const refund = newRefund(world, account, {
    amount,
    charge: charge.id,
    payment_intent: charge.payment_intent,
    reason,
    metadata: params.metadata(),
    status: fate === "pending" ? "pending" : "succeeded",
    source_transfer_reversal: null,
  });
  refund.balance_transaction = world.book(
    account,
    "refund",
    -amount,
    refund.id,
    isPending && booked ? { availableAtMs: booked._availableAtMs } : {},
  ).id;
  world.save(world.refunds, refund);
  charge.amount_refunded += amount;
  charge.refunded = charge.amount_refunded === charge.amount;
  world.save(world.charges, charge);
  world.emit("charge.refunded", charge, { account });
  world.emit("refund.created", refund, { account });
  if (fate) world.later(fate === "fails" ? "fail-refund" : "finish-refund", refund.id, REFUND_SETTLES_MS);
  return refund;
}

const isRefundable = (world: World, charge: Charge): boolean =>
  world.disputes.all().some((dispute) => dispute.charge === charge.id && dispute.status === "won");

type RefundSeed = Pick<
  Refund,
  "amount" | "charge" | "payment_intent" | "reason" | "metadata" | "status" | "source_transfer_reversal"
>;

export function newRefund(world: World, account: string, seed: RefundSeed, prefix = "re"): Refund {
  return {
    ...world.kept(prefix, account),
    ...seed,
    object: "refund",
    balance_transaction: null,
    rest: {
      currency: "usd",
      customer: null,
      customer_account: null,
      destination_details: {
        type: "card",
        card: {
          reference: "7921387142393832",
          reference_status: "available",
          reference_type: "acquirer_reference_number",
          type: "refund",
        },
      },
      payment_method: null,
      receipt_number: null,
      transfer_reversal: null,
    },
  };
}

/** The bank of the card holder takes the refund. */
export function finishRefund(world: World, refund: Refund): void {
  if (refund.status !== "pending") return;
  refund.status = "succeeded";
  world.save(world.refunds, refund);
  world.emit("refund.updated", refund, { account: refund._account });
}

/** The bank sends the refund back: the money returns to the balance, and the charge is unrefunded again. */
export function failRefund(world: World, refund: Refund, status: "failed" | "canceled" = "failed"): void {
  if (refund.status === "failed" || refund.status === "canceled") return;
  refund.status = status;
  refund.failure_balance_transaction = world.book(
    refund._account,
    "refund_failure",
    refund.amount,
    refund.id,
  ).id;
  if (status === "failed") refund.failure_reason = "expired_or_canceled_card";
  world.save(world.refunds, refund);
  const charge = world.charges.find(refund.charge ?? "");
  if (charge) {
    charge.amount_refunded -= refund.amount;
    charge.refunded = false;
    world.save(world.charges, charge);
  }
  world.emit("refund.updated", refund, { account: refund._account });
  if (status === "failed") world.emit("refund.failed", refund, { account: refund._account });
}
