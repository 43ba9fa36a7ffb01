import { randomBytes } from "node:crypto";
import { BANKS, ROUTING_NUMBER } from "./cards";
import { StripeError, badParameter, invalid, noSuch } from "./errors";
import type { Params } from "./form";
import type { Account, Bank, Payout, Requirements, Reversal, TopUp, Transfer } from "./objects";
import { CHARGE_REST, newRefund } from "./payments";
import { PLATFORM, type World } from "./world";

const LINK_MS = 300_000;
const DEFAULT_BANK = "000123456789";
const TYPES = ["express", "custom", "standard"] as const;
const DUE = [
  "business_profile.url",
  "external_account",
  "individual.dob.day",
  "individual.first_name",
  "individual.last_name",
  "tos_acceptance.date",
];

const requirementsOf = (due: string[], disabled: string | null, verifying: string[] = []): Requirements => ({
  currently_due: due,
  eventually_due: due,
  past_due: disabled === "requirements.past_due" ? due : [],
  pending_verification: verifying,
  disabled_reason: disabled,
  rest: { alternatives: [], current_deadline: null, errors: [] },
});

export function createAccount(world: World, params: Params): Account {
  const type = params.choice("type", TYPES) ?? (params.has("controller") ? "none" : "standard");
  const country = params.text("country") ?? "US";
  if (country !== "US")
    throw badParameter(
      "This stand-in only keeps accounts in the United States.",
      "country",
      "country_unsupported",
    );
  const capabilities = params.nested("capabilities");
  const requested = (name: string) => capabilities.nested(name).flag("requested") === true;
  const account: Account = {
    ...world.kept("acct", PLATFORM),
    object: "account",
    type,
    email: params.optional("email"),
    country,
    business_type: params.optional("business_type"),
    charges_enabled: false,
    payouts_enabled: false,
    details_submitted: false,
    capabilities: {
      ...(requested("transfers") && { transfers: "inactive" as const }),
      ...(requested("card_payments") && { card_payments: "inactive" as const }),
    },
    requirements: requirementsOf([...DUE], "requirements.past_due"),
    metadata: params.metadata(),
    _banks: [],
    rest: {
      business_profile: {
        annual_revenue: null,
        estimated_worker_count: null,
        mcc: null,
        minority_owned_business_designation: null,
        name: null,
        product_description: null,
        specified_commercial_transactions_act_url: null,
        support_address: null,
        support_email: null,
        support_phone: null,
        support_url: null,
        url: null,
      },
      controller: {
        type: "application",
        fees: { payer: "application" },
        is_controller: true,
        losses: { payments: "application" },
        requirement_collection: "stripe",
        stripe_dashboard: { type: type === "express" ? "express" : "none" },
      },
      default_currency: "usd",
      future_requirements: {
        alternatives: [],
        current_deadline: null,
        currently_due: [],
        disabled_reason: null,
        errors: [],
        eventually_due: [],
        past_due: [],
        pending_verification: [],
      },
      // Payouts are made on demand only: a schedule of Stripe's own would race with the product's.
      settings: {
        branding: { icon: null, logo: null, primary_color: null, secondary_color: null },
        card_payments: {
          decline_on: { avs_failure: false, cvc_failure: false },
          statement_descriptor_prefix: null,
          statement_descriptor_prefix_kana: null,
          statement_descriptor_prefix_kanji: null,
        },
        dashboard: { display_name: null, timezone: "Etc/UTC" },
        payments: {
          statement_descriptor: null,
          statement_descriptor_kana: null,
          statement_descriptor_kanji: null,
          statement_descriptor_prefix_kana: null,
          statement_descriptor_prefix_kanji: null,
        },
        payouts: {
          debit_negative_balances: true,
          schedule: { delay_days: 2, interval: "manual" },
          statement_descriptor: null,
        },
      },
      tos_acceptance: { date: null, ip: null, user_agent: null },
    },
  };
  const bank = params.nested("external_account");
  if (params.has("external_account"))
    account._banks.push(newBank(world, account.id, bank.required("account_number"), true));
  return world.save(world.accounts, account);
}

export function updateAccount(world: World, account: Account, params: Params): Account {
  if (params.has("email")) account.email = params.optional("email");
  account.metadata = params.metadata(account.metadata);
  const capabilities = params.nested("capabilities");
  for (const name of ["transfers", "card_payments"] as const) {
    const wanted = capabilities.nested(name).flag("requested");
    if (wanted === true) account.capabilities[name] ??= account.details_submitted ? "active" : "inactive";
    if (wanted === false) delete account.capabilities[name];
  }
  if (params.has("external_account")) {
    account._banks = [
      newBank(world, account.id, params.nested("external_account").required("account_number"), true),
    ];
  }
  world.save(world.accounts, account);
  world.emit("account.updated", account, { account: account.id });
  return account;
}

export function newBank(world: World, account: string, number: string, isDefault: boolean): Bank {
  if (!(number in BANKS))
    throw invalid(
      "You must use a test bank account number in test mode. Try 000123456789.",
      "account_number_invalid",
      "external_account[account_number]",
    );
  return {
    id: world.id("ba"),
    object: "bank_account",
    account,
    last4: number.slice(-4),
    status: "new",
    default_for_currency: isDefault,
    account_holder_name: null,
    metadata: {},
    _number: number,
    rest: {
      account_holder_type: "individual",
      account_type: null,
      available_payout_methods: ["standard"],
      bank_name: "STRIPE TEST BANK",
      country: "US",
      currency: "usd",
      fingerprint: number,
      future_requirements: null,
      requirements: null,
      routing_number: ROUTING_NUMBER,
    },
  };
}

export function addBank(world: World, account: Account, params: Params): Bank {
  const isDefault = params.flag("default_for_currency") === true || account._banks.length === 0;
  const bank = newBank(
    world,
    account.id,
    params.nested("external_account").required("account_number"),
    isDefault,
  );
  if (isDefault) for (const other of account._banks) other.default_for_currency = false;
  account._banks.push(bank);
  world.save(world.accounts, account);
  world.emit("account.external_account.created", bank, { account: account.id });
  return bank;
}

export function createLink(world: World, params: Params): unknown {
  const account = world.get(world.accounts, "account", params.required("account"), PLATFORM, "account");
  if (account.type === "standard" && account.details_submitted)
    throw invalid("The account has already been onboarded.");
  params.choice("type", ["account_onboarding", "account_update"]);
  params.required("type");
  const token = randomBytes(16).toString("hex");
  const expiresMs = world.clock.nowMs() + LINK_MS;
  const link = {
    token,
    account: account.id,
    returnUrl: params.required("return_url"),
    refreshUrl: params.required("refresh_url"),
    expiresMs,
    isUsed: false,
  };
  world.links.put(token, link);
  return {
    object: "account_link",
    created: world.clock.nowSeconds(),
    expires_at: Math.floor(expiresMs / 1000),
    url: `${world.baseUrl}/onboarding/${token}`,
  };
}

/** What the onboarding page hands in. The details are looked at for a while, then the account becomes active. */
export function completeOnboarding(world: World, account: Account, bankNumber = DEFAULT_BANK): void {
  if (account._banks.length === 0 || account._banks.every((bank) => bank._number !== bankNumber)) {
    for (const bank of account._banks) bank.default_for_currency = false;
    account._banks.push(newBank(world, account.id, bankNumber, true));
  }
  account.details_submitted = true;
  if (world.settings.verifyMs > 0) {
    for (const name of capabilityNames(account)) account.capabilities[name] = "pending";
    account.requirements = requirementsOf([], "requirements.pending_verification", [
      "individual.verification.document",
    ]);
    world.save(world.accounts, account);
    world.emit("account.updated", account, { account: account.id });
    world.later("activate-account", account.id, world.settings.verifyMs);
  } else activateAccount(world, account);
}

const capabilityNames = ({ capabilities }: Account): ("transfers" | "card_payments")[] =>
  (["transfers", "card_payments"] as const).filter((name) => capabilities[name] !== undefined);

export function activateAccount(world: World, account: Account): void {
  for (const name of capabilityNames(account)) account.capabilities[name] = "active";
  account.charges_enabled = account.capabilities.card_payments === "active";
  account.payouts_enabled = true;
  account.requirements = requirementsOf([], null);
  world.save(world.accounts, account);
  world.emit("account.updated", account, { account: account.id });
}

/** Stripe asks again: nothing goes in or out until the person answers. */
export function restrictAccount(world: World, account: Account): void {
  for (const name of capabilityNames(account)) account.capabilities[name] = "inactive";
  account.charges_enabled = false;
  account.payouts_enabled = false;
  account.requirements = requirementsOf(["individual.verification.document"], "requirements.past_due");
  world.save(world.accounts, account);
  world.emit("account.updated", account, { account: account.id });
}

export const presentCapability = (account: Account, name: string): unknown => {
  const status =
    name === "transfers"
      ? account.capabilities.transfers
      : name === "card_payments"
        ? account.capabilities.card_payments
        : undefined;
  if (status === undefined) throw noSuch("capability", name, "capability");
  return {
    id: name,
    object: "capability",
    account: account.id,
    requested: true,
    requested_at: account.created,
    requirements: {
      alternatives: [],
      current_deadline: null,
      currently_due: account.requirements.currently_due,
      disabled_reason: account.requirements.disabled_reason,
      errors: [],
      eventually_due: account.requirements.eventually_due,
      past_due: account.requirements.past_due,
      pending_verification: account.requirements.pending_verification,
    },
    status,
  };
};

export function createTransfer(world: World, params: Params): Transfer {
  params.currency();
  const destination = params.required("destination");
  const account = world.get(world.accounts, "destination", destination, PLATFORM, "destination");
  const sourceId = params.optional("source_transaction");
  const source = sourceId
    ? world.get(world.charges, "charge", sourceId, PLATFORM, "source_transaction")
    : null;
  const amount = params.amount();
  const metadata = params.metadata();
  const description = params.optional("description");
  const group = params.optional("transfer_group") ?? source?.transfer_group ?? null;
  if (account.capabilities.transfers !== "active") {
    throw invalid(
      "Your destination account needs to have at least one of the following capabilities enabled: transfers, crypto_transfers, legacy_payments",
      "insufficient_capabilities_for_transfer",
    );
  }
  let availableAtMs = world.clock.nowMs();
  if (source) {
    const booked = world.transactions.find(source.balance_transaction ?? "");
    if (!booked) throw invalid(`The charge ${source.id} was not captured.`, undefined, "source_transaction");
    if (source._transferred + amount > source.amount_captured - source.amount_refunded) {
      throw invalid(
        "Transfers using this transaction as a source must not exceed the source amount.",
        "transfer_source_balance_parameters_mismatch",
        "amount",
      );
    }
    source._transferred += amount;
    world.save(world.charges, source);
    // The money moves now and becomes usable when the charge's does.
    availableAtMs = Math.max(availableAtMs, booked._availableAtMs);
  } else if (world.balance(PLATFORM).available < amount) {
    throw invalid(
      "You have insufficient available funds in your Stripe account. Try adding funds directly to your available balance by creating Charges using the 4000000000000077 test card.",
      "balance_insufficient",
    );
  }
  const kept = world.kept("tr", PLATFORM);
  const payment = world.kept("py", destination);
  const transfer: Transfer = {
    ...kept,
    object: "transfer",
    amount,
    amount_reversed: 0,
    reversed: false,
    balance_transaction: world.book(PLATFORM, "transfer", -amount, kept.id, { availableAtMs }).id,
    destination,
    destination_payment: payment.id,
    description,
    source_transaction: source?.id ?? null,
    transfer_group: group,
    metadata,
    rest: { currency: "usd", livemode: false, source_type: "card" },
  };
  world.save(world.charges, {
    ...payment,
    object: "charge",
    amount,
    amount_captured: amount,
    amount_refunded: 0,
    captured: true,
    paid: true,
    refunded: false,
    disputed: false,
    status: "succeeded",
    balance_transaction: world.book(destination, "payment", amount, payment.id, { availableAtMs }).id,
    payment_intent: null,
    payment_method: null,
    failure_code: null,
    failure_message: null,
    source_transfer: transfer.id,
    transfer_group: null,
    description: null,
    metadata: {},
    receipt_url: null,
    _card: null,
    _transferred: 0,
    rest: CHARGE_REST,
  });
  world.save(world.transfers, transfer);
  world.emit("transfer.created", transfer);
  world.emit("payment.created", world.get(world.charges, "charge", payment.id, destination), {
    account: destination,
  });
  return transfer;
}

export function reverseTransfer(world: World, transfer: Transfer, params: Params): Reversal {
  const left = transfer.amount - transfer.amount_reversed;
  const amount = params.optionalAmount() ?? left;
  const metadata = params.metadata();
  if (left === 0)
    throw invalid(`Transfer ${transfer.id} is already fully reversed.`, "transfer_already_reversed");
  if (amount > left)
    throw invalid(
      `Reversal amount ($${(amount / 100).toFixed(2)}) is greater than the unreversed amount on the transfer ($${(left / 100).toFixed(2)})`,
      undefined,
      "amount",
    );
  const payment = world.charges.find(transfer.destination_payment);
  const booked = world.transactions.find(payment?.balance_transaction ?? "");
  const isPending = booked !== undefined && !world.isAvailable(booked);
  const { available, pending } = world.balance(transfer.destination);
  if ((isPending ? available + pending : available) < amount) {
    throw invalid(
      "The recipient of the transfer has insufficient funds in their Stripe account to reverse this transfer.",
      "balance_insufficient",
    );
  }
  const when = isPending && booked ? { availableAtMs: booked._availableAtMs } : {};
  const kept = world.kept("trr", PLATFORM);
  const refund = newRefund(
    world,
    transfer.destination,
    {
      amount,
      charge: transfer.destination_payment,
      payment_intent: null,
      reason: null,
      metadata: {},
      status: "succeeded",
      source_transfer_reversal: kept.id,
    },
    "pyr",
  );
  refund.balance_transaction = world.book(
    transfer.destination,
    "payment_refund",
    -amount,
    refund.id,
    when,
  ).id;
  world.save(world.refunds, refund);
  if (payment) {
    payment.amount_refunded += amount;
    payment.refunded = payment.amount_refunded === payment.amount;
    world.save(world.charges, payment);
  }
  const reversal = world.save(world.reversals, {
    ...kept,
    object: "transfer_reversal" as const,
    amount,
    balance_transaction: world.book(PLATFORM, "transfer_refund", amount, kept.id, when).id,
    destination_payment_refund: refund.id,
    transfer: transfer.id,
    metadata,
    rest: { currency: "usd", source_refund: null },
  });
  transfer.amount_reversed += amount;
  transfer.reversed = transfer.amount_reversed === transfer.amount;
  world.save(world.transfers, transfer);
  const source = world.charges.find(transfer.source_transaction ?? "");
  if (source) {
    source._transferred -= amount;
    world.save(world.charges, source);
  }
  world.emit("transfer.reversed", transfer);
  return reversal;
}

const defaultBank = (account: Account | undefined): Bank | undefined =>
  account?._banks.find((bank) => bank.default_for_currency) ?? account?._banks[0];

export function createPayout(world: World, params: Params, accountId: string): Payout {
  const amount = params.amount();
  params.currency();
  const metadata = params.metadata();
  const description = params.optional("description");
  const descriptor = params.optional("statement_descriptor");
  const account = world.accounts.find(accountId);
  if (account && !account.payouts_enabled)
    throw invalid("Cannot create payouts: this account has payouts disabled.", "payouts_not_allowed");
  const wanted = params.optional("destination");
  const bank = wanted ? account?._banks.find(({ id }) => id === wanted) : defaultBank(account);
  if (account && !bank)
    throw invalid(
      "Sorry, you don't have any external accounts in that currency (usd).",
      "account_missing_external_account",
    );
  if (world.balance(accountId).available < amount)
    throw invalid(
      "You have insufficient funds in your Stripe account for this transfer. Your card balance is too low.",
      "balance_insufficient",
    );
  const kept = world.kept("po", accountId);
  const payout = world.save(world.payouts, {
    ...kept,
    object: "payout" as const,
    amount,
    status: "pending" as const,
    arrival_date: kept.created + 86_400 * 2,
    automatic: false,
    balance_transaction: world.book(accountId, "payout", -amount, kept.id).id,
    failure_balance_transaction: null,
    failure_code: null,
    failure_message: null,
    destination: bank?.id ?? null,
    description,
    statement_descriptor: descriptor,
    reversed_by: null,
    metadata,
    rest: {
      currency: "usd",
      application_fee: null,
      application_fee_amount: null,
      livemode: false,
      method: "standard",
      original_payout: null,
      payout_method: null,
      reconciliation_status: "not_applicable",
      source_type: "card",
      trace_id: { status: "pending", value: null },
      type: "bank_account",
    },
  });
  world.emit("payout.created", payout, { account: accountId });
  world.later("send-payout", payout.id, world.settings.payoutStepMs);
  return payout;
}

/** The bank has been asked. */
export function sendPayout(world: World, payout: Payout): void {
  if (payout.status !== "pending") return;
  payout.status = "in_transit";
  world.save(world.payouts, payout);
  world.emit("payout.updated", payout, { account: payout._account, previous: { status: "pending" } });
  world.later("finish-payout", payout.id, world.settings.payoutStepMs);
}

/** The bank takes the payout, or sends it back, by its account number. */
export function finishPayout(world: World, payout: Payout): void {
  if (payout.status !== "in_transit") return;
  const bank = world.accounts.find(payout._account)?._banks.find(({ id }) => id === payout.destination);
  const failure = bank ? BANKS[bank._number] : null;
  if (failure) return failPayout(world, payout, failure);
  payout.status = "paid";
  world.save(world.payouts, payout);
  world.emit("payout.paid", payout, { account: payout._account });
}

/** The money comes back to the balance. A payout that was reported as paid may fail after all. */
export function failPayout(
  world: World,
  payout: Payout,
  { code, message }: { code: string; message: string },
): void {
  if (payout.status === "failed" || payout.status === "canceled")
    throw invalid(`This payout is ${payout.status} already.`);
  Object.assign(payout, { status: "failed", failure_code: code, failure_message: message });
  payout.failure_balance_transaction = world.book(
    payout._account,
    "payout_failure",
    payout.amount,
    payout.id,
  ).id;
  const bank = world.accounts.find(payout._account)?._banks.find(({ id }) => id === payout.destination);
  if (bank) bank.status = "errored";
  world.save(world.payouts, payout);
  world.emit("payout.failed", payout, { account: payout._account });
}

export function cancelPayout(world: World, payout: Payout): Payout {
  if (payout.status !== "pending")
    throw invalid("Payouts can only be canceled while they are pending.", "payout_already_canceled");
  payout.status = "canceled";
  payout.failure_balance_transaction = world.book(
    payout._account,
    "payout_cancel",
    payout.amount,
    payout.id,
  ).id;
  world.timers.delete(`send-payout:${payout.id}`);
  world.save(world.payouts, payout);
  world.emit("payout.canceled", payout, { account: payout._account });
  return payout;
}

export function createTopUp(world: World, params: Params): TopUp {
  const amount = params.amount();
  params.currency();
  const metadata = params.metadata();
  const description = params.optional("description");
  const group = params.optional("transfer_group");
  const kept = world.kept("tu", PLATFORM);
  const topup = world.save(world.topups, {
    ...kept,
    object: "topup" as const,
    amount,
    status: "succeeded" as const,
    balance_transaction: world.book(PLATFORM, "topup", amount, kept.id).id,
    description,
    metadata,
    transfer_group: group,
    rest: {
      currency: "usd",
      expected_availability_date: kept.created,
      failure_code: null,
      failure_message: null,
      initiated_by: null,
      livemode: false,
      source: null,
      statement_descriptor: params.optional("statement_descriptor"),
    },
  });
  world.emit("topup.created", topup);
  world.emit("topup.succeeded", topup);
  return topup;
}

export function deleteAccount(world: World, account: Account): unknown {
  const { available, pending } = world.balance(account.id);
  if (available + pending !== 0)
    throw new StripeError(400, {
      type: "invalid_request_error",
      message: "The account has a balance and cannot be deleted.",
    });
  world.accounts.delete(account.id);
  return { id: account.id, object: "account", deleted: true };
}
