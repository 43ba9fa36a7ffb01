import { randomBytes } from "node:crypto";
import {
  addBank,
  cancelPayout,
  createAccount,
  createLink,
  createPayout,
  createTopUp,
  createTransfer,
  deleteAccount,
  presentCapability,
  reverseTransfer,
  updateAccount,
} from "./connect";
import { closeDispute, updateDispute } from "./disputes";
import { StripeError, badParameter, invalid, noSuch } from "./errors";
import type { Params } from "./form";
import { LIST_PARAMS, PAGE_PARAMS, expand, lineItems, listPage, matching } from "./lists";
import type {
  Account,
  Charge,
  Customer,
  Dispute,
  Endpoint,
  Intent,
  Kept,
  PaymentMethod,
  Payout,
  Refund,
  Session,
  TopUp,
  Transaction,
  Transfer,
} from "./objects";
import {
  cancelIntent,
  captureIntent,
  confirmIntent,
  createIntent,
  createRefund,
  createSession,
  expireSession,
  failRefund,
  newMethod,
  updateIntent,
} from "./payments";
import { PLATFORM, type World } from "./world";
import type { Table } from "../shared/tables";

export type Request = { world: World; params: Params; account: string; ids: string[] };
export type Route = {
  method: "GET" | "POST" | "DELETE";
  path: string;
  /** Parameters that it takes; another one is refused, as Stripe does. */
  params: readonly string[];
  run: (request: Request) => unknown;
};

const INTENT_PARAMS = [
  "amount",
  "currency",
  "customer",
  "metadata",
  "description",
  "transfer_group",
  "receipt_email",
  "payment_method",
  "payment_method_types",
  "statement_descriptor",
  "statement_descriptor_suffix",
  "setup_future_usage",
];
const ACCOUNT_PARAMS = [
  "email",
  "business_type",
  "business_profile",
  "capabilities",
  "external_account",
  "individual",
  "company",
  "metadata",
  "settings",
  "tos_acceptance",
  "default_currency",
];

const first = (ids: string[], index = 0): string => ids[index] ?? "";

/** Routes that every kind of object has: one by id, and a page of them. */
function reading<T extends Kept>(
  path: string,
  what: string,
  table: (world: World) => Table<T>,
  filters: readonly (keyof T & string)[] = [],
  base: readonly string[] = LIST_PARAMS,
): Route[] {
  return [
    {
      method: "GET",
      path,
      params: [...base, ...filters],
      run: ({ world, params, account }) =>
        listPage(matching(table(world), account, params, filters), params, path, (row) => world.render(row)),
    },
    {
      method: "GET",
      path: `${path}/:id`,
      params: [],
      run: ({ world, account, ids }) => world.get(table(world), what, first(ids), account),
    },
  ];
}

/** A change of metadata, and of a description where there is one. */
function describing<T extends Kept & { metadata: Record<string, string> }>(
  path: string,
  what: string,
  table: (world: World) => Table<T>,
  change: (row: T, params: Params) => void = () => undefined,
  extra: readonly string[] = [],
): Route {
  return {
    method: "POST",
    path: `${path}/:id`,
    params: ["metadata", ...extra],
    run: ({ world, params, account, ids }) => {
      const row = world.get(table(world), what, first(ids), account);
      row.metadata = params.metadata(row.metadata);
      change(row, params);
      return world.save(table(world), row);
    },
  };
}

const intentOf = ({ world, account, ids }: Request) =>
  world.get(world.intents, "payment_intent", first(ids), account, "intent");
const transferOf = ({ world, ids }: Request) => world.get(world.transfers, "transfer", first(ids), PLATFORM);
const payoutOf = ({ world, account, ids }: Request) =>
  world.get(world.payouts, "payout", first(ids), account);
const disputeOf = ({ world, account, ids }: Request) =>
  world.get(world.disputes, "dispute", first(ids), account);

function accountOf({ world, ids, account }: Request): Account {
  const id = first(ids);
  const found = world.accounts.find(id);
  if (!found || (account !== PLATFORM && account !== id)) {
    throw new StripeError(403, {
      type: "invalid_request_error",
      code: "account_invalid",
      message: `The provided key does not have access to account '${id}' (or that account does not exist). Application access may have been revoked.`,
    });
  }
  return found;
}

export const ROUTES: Route[] = [
  // Checkout
  ...reading<Session>("/v1/checkout/sessions", "checkout.session", (world) => world.sessions, [
    "payment_intent",
    "status",
    "customer",
  ]),
  {
    method: "POST",
    path: "/v1/checkout/sessions",
    params: [
      "mode",
      "client_reference_id",
      "line_items",
      "metadata",
      "payment_intent_data",
      "success_url",
      "cancel_url",
      "customer",
      "customer_email",
      "customer_creation",
      "payment_method_types",
      "expires_at",
      "submit_type",
      "currency",
      "locale",
      "billing_address_collection",
      "phone_number_collection",
    ],
    run: ({ world, params, account }) => createSession(world, params, account),
  },
  {
    method: "POST",
    path: "/v1/checkout/sessions/:id/expire",
    params: [],
    run: ({ world, account, ids }) =>
      expireSession(world, world.get(world.sessions, "checkout.session", first(ids), account)),
  },
  {
    method: "GET",
    path: "/v1/checkout/sessions/:id/line_items",
    params: PAGE_PARAMS,
    run: ({ world, account, ids }) =>
      lineItems(world, world.get(world.sessions, "checkout.session", first(ids), account).id),
  },

  // Payments
  ...reading<Intent>("/v1/payment_intents", "payment_intent", (world) => world.intents, ["customer"]),
  {
    method: "POST",
    path: "/v1/payment_intents",
    params: [
      ...INTENT_PARAMS,
      "confirm",
      "capture_method",
      "return_url",
      "off_session",
      "confirmation_method",
    ],
    run: ({ world, params, account }) => createIntent(world, params, account),
  },
  {
    method: "POST",
    path: "/v1/payment_intents/:id",
    params: INTENT_PARAMS,
    run: (request) => updateIntent(request.world, intentOf(request), request.params),
  },
  {
    method: "POST",
    path: "/v1/payment_intents/:id/confirm",
    params: ["payment_method", "return_url", "client_secret", "off_session", "receipt_email"],
    run: (request) => confirmIntent(request.world, intentOf(request), request.params),
  },
  {
    method: "POST",
    path: "/v1/payment_intents/:id/capture",
    params: ["amount_to_capture"],
    run: (request) => captureIntent(request.world, intentOf(request), request.params),
  },
  {
    method: "POST",
    path: "/v1/payment_intents/:id/cancel",
    params: ["cancellation_reason"],
    run: (request) => cancelIntent(request.world, intentOf(request), request.params),
  },
  ...reading<Charge>("/v1/charges", "charge", (world) => world.charges, ["payment_intent", "transfer_group"]),
  describing<Charge>(
    "/v1/charges",
    "charge",
    (world) => world.charges,
    (charge, params) => {
      if (params.has("description")) charge.description = params.optional("description");
      if (params.has("transfer_group")) charge.transfer_group = params.optional("transfer_group");
    },
    ["description", "transfer_group"],
  ),
  ...reading<Refund>("/v1/refunds", "refund", (world) => world.refunds, ["charge", "payment_intent"]),
  {
    method: "POST",
    path: "/v1/refunds",
    params: ["charge", "payment_intent", "amount", "reason", "metadata"],
    run: ({ world, params, account }) => createRefund(world, params, account),
  },
  describing("/v1/refunds", "refund", (world) => world.refunds),
  {
    method: "POST",
    path: "/v1/refunds/:id/cancel",
    params: [],
    run: ({ world, account, ids }) => {
      const refund = world.get(world.refunds, "refund", first(ids), account);
      if (refund.status !== "pending") throw invalid("Only refunds that are pending can be canceled.");
      failRefund(world, refund, "canceled");
      return refund;
    },
  },
  ...reading<Dispute>("/v1/disputes", "dispute", (world) => world.disputes, ["charge", "payment_intent"]),
  {
    method: "POST",
    path: "/v1/disputes/:id",
    params: ["evidence", "metadata", "submit"],
    run: (request) => updateDispute(request.world, disputeOf(request), request.params),
  },
  {
    method: "POST",
    path: "/v1/disputes/:id/close",
    params: [],
    run: (request) => closeDispute(request.world, disputeOf(request), "lost"),
  },

  // Customers and their cards
  ...reading<Customer>("/v1/customers", "customer", (world) => world.customers, ["email"]),
  {
    method: "POST",
    path: "/v1/customers",
    params: ["email", "name", "description", "phone", "metadata"],
    run: ({ world, params, account }) =>
      world.save(world.customers, {
        ...world.kept("cus", account),
        object: "customer" as const,
        email: params.optional("email"),
        name: params.optional("name"),
        description: params.optional("description"),
        phone: params.optional("phone"),
        metadata: params.metadata(),
        rest: {
          address: null,
          balance: 0,
          currency: null,
          default_source: null,
          delinquent: false,
          discount: null,
          invoice_prefix: "LOCAL",
          invoice_settings: {
            custom_fields: null,
            default_payment_method: null,
            footer: null,
            rendering_options: null,
          },
          livemode: false,
          next_invoice_sequence: 1,
          preferred_locales: [],
          shipping: null,
          tax_exempt: "none",
          test_clock: null,
        },
      }),
  },
  describing(
    "/v1/customers",
    "customer",
    (world) => world.customers,
    (customer, params) => {
      for (const field of ["email", "name", "description", "phone"] as const)
        if (params.has(field)) customer[field] = params.optional(field);
    },
    ["email", "name", "description", "phone"],
  ),
  {
    method: "DELETE",
    path: "/v1/customers/:id",
    params: [],
    run: ({ world, account, ids }) => {
      const { id } = world.get(world.customers, "customer", first(ids), account);
      world.customers.delete(id);
      return { id, object: "customer", deleted: true };
    },
  },
  ...reading<PaymentMethod>(
    "/v1/payment_methods",
    "PaymentMethod",
    (world) => world.methods,
    ["customer", "type"],
    PAGE_PARAMS,
  ),
  {
    method: "POST",
    path: "/v1/payment_methods",
    params: ["type", "card", "metadata", "billing_details"],
    run: ({ world, params, account }) => {
      if (params.required("type") !== "card")
        throw badParameter("This stand-in only takes cards.", "type", "parameter_invalid_enum");
      const card = params.nested("card");
      return newMethod(world, card.required("number").replaceAll(" ", ""), account, {
        month: card.integer("exp_month") ?? 12,
        year: card.integer("exp_year") ?? 2034,
      });
    },
  },

  // Connected accounts
  {
    method: "GET",
    path: "/v1/account",
    params: [],
    run: ({ world, account }) => world.accounts.find(account) ?? platformAccount(world),
  },
  {
    method: "GET",
    path: "/v1/accounts",
    params: LIST_PARAMS,
    run: ({ world, params }) =>
      listPage(world.accounts.all(), params, "/v1/accounts", (row) => world.render(row)),
  },
  {
    method: "POST",
    path: "/v1/accounts",
    params: [...ACCOUNT_PARAMS, "type", "country", "controller"],
    run: ({ world, params }) => createAccount(world, params),
  },
  {
    method: "GET",
    path: "/v1/accounts/:id",
    params: [],
    run: (request) => (first(request.ids) === PLATFORM ? platformAccount(request.world) : accountOf(request)),
  },
  {
    method: "POST",
    path: "/v1/accounts/:id",
    params: ACCOUNT_PARAMS,
    run: (request) => updateAccount(request.world, accountOf(request), request.params),
  },
  {
    method: "DELETE",
    path: "/v1/accounts/:id",
    params: [],
    run: (request) => deleteAccount(request.world, accountOf(request)),
  },
  {
    method: "POST",
    path: "/v1/account_links",
    params: ["account", "refresh_url", "return_url", "type", "collect", "collection_options"],
    run: ({ world, params }) => createLink(world, params),
  },
  {
    method: "POST",
    path: "/v1/accounts/:id/login_links",
    params: [],
    run: (request) => {
      const account = accountOf(request);
      if (!account.details_submitted)
        throw invalid("Cannot create a login link for an account that has not completed onboarding.");
      return {
        object: "login_link",
        created: request.world.clock.nowSeconds(),
        url: `${request.world.baseUrl}/accounts/${account.id}`,
      };
    },
  },
  {
    method: "GET",
    path: "/v1/accounts/:id/capabilities",
    params: [],
    run: (request) => {
      const account = accountOf(request);
      return {
        object: "list",
        data: Object.keys(account.capabilities).map((name) => presentCapability(account, name)),
        has_more: false,
        url: `/v1/accounts/${account.id}/capabilities`,
      };
    },
  },
  {
    method: "GET",
    path: "/v1/accounts/:id/capabilities/:capability",
    params: [],
    run: (request) => presentCapability(accountOf(request), first(request.ids, 1)),
  },
  {
    method: "GET",
    path: "/v1/accounts/:id/external_accounts",
    params: PAGE_PARAMS,
    run: (request) =>
      listPage(
        accountOf(request)._banks,
        request.params,
        `/v1/accounts/${first(request.ids)}/external_accounts`,
        (bank) => request.world.render(bank),
      ),
  },
  {
    method: "POST",
    path: "/v1/accounts/:id/external_accounts",
    params: ["external_account", "default_for_currency", "metadata"],
    run: (request) => addBank(request.world, accountOf(request), request.params),
  },
  {
    method: "GET",
    path: "/v1/accounts/:id/external_accounts/:bank",
    params: [],
    run: (request) =>
      accountOf(request)._banks.find(({ id }) => id === first(request.ids, 1)) ??
      fail(noSuch("external account", first(request.ids, 1))),
  },

  // Money out
  ...reading<Transfer>("/v1/transfers", "transfer", (world) => world.transfers, [
    "destination",
    "transfer_group",
  ]),
  {
    method: "POST",
    path: "/v1/transfers",
    params: [
      "amount",
      "currency",
      "destination",
      "description",
      "metadata",
      "source_transaction",
      "source_type",
      "transfer_group",
    ],
    run: ({ world, params }) => createTransfer(world, params),
  },
  describing(
    "/v1/transfers",
    "transfer",
    (world) => world.transfers,
    (transfer, params) => {
      if (params.has("description")) transfer.description = params.optional("description");
    },
    ["description"],
  ),
  {
    method: "POST",
    path: "/v1/transfers/:id/reversals",
    params: ["amount", "description", "metadata", "refund_application_fee"],
    run: (request) => reverseTransfer(request.world, transferOf(request), request.params),
  },
  {
    method: "GET",
    path: "/v1/transfers/:id/reversals",
    params: PAGE_PARAMS,
    run: (request) => {
      const { id } = transferOf(request);
      return listPage(
        request.world.reversals.all().filter(({ transfer }) => transfer === id),
        request.params,
        `/v1/transfers/${id}/reversals`,
        (row) => request.world.render(row),
      );
    },
  },
  {
    method: "GET",
    path: "/v1/transfers/:id/reversals/:reversal",
    params: [],
    run: (request) =>
      request.world.get(request.world.reversals, "transfer reversal", first(request.ids, 1), PLATFORM),
  },
  ...reading<Payout>("/v1/payouts", "payout", (world) => world.payouts, ["destination", "status"]),
  {
    method: "POST",
    path: "/v1/payouts",
    params: [
      "amount",
      "currency",
      "description",
      "destination",
      "metadata",
      "method",
      "source_type",
      "statement_descriptor",
    ],
    run: ({ world, params, account }) => createPayout(world, params, account),
  },
  describing("/v1/payouts", "payout", (world) => world.payouts),
  {
    method: "POST",
    path: "/v1/payouts/:id/cancel",
    params: [],
    run: (request) => cancelPayout(request.world, payoutOf(request)),
  },
  ...reading<TopUp>("/v1/topups", "topup", (world) => world.topups, ["status"]),
  {
    method: "POST",
    path: "/v1/topups",
    params: [
      "amount",
      "currency",
      "description",
      "metadata",
      "source",
      "statement_descriptor",
      "transfer_group",
    ],
    run: ({ world, params }) => createTopUp(world, params),
  },

  // Balances
  {
    method: "GET",
    path: "/v1/balance",
    params: [],
    run: ({ world, account }) => {
      const { available, pending } = world.balance(account);
      const money = (amount: number) => [{ amount, currency: "usd", source_types: { card: amount } }];
      return {
        object: "balance",
        available: money(available),
        livemode: false,
        pending: money(pending),
        ...(account === PLATFORM && { connect_reserved: [{ amount: 0, currency: "usd" }] }),
      };
    },
  },
  ...reading<Transaction>("/v1/balance_transactions", "balance transaction", (world) => world.transactions, [
    "type",
    "source",
  ]),

  // Events and their endpoints
  {
    method: "GET",
    path: "/v1/events",
    params: [...LIST_PARAMS, "type", "types", "delivery_success"],
    run: ({ world, params, account }) => {
      const types = params.strings("types");
      const one = params.optional("type");
      const rows = matching(world.events, account, params, []).filter(
        ({ type }) =>
          (types.length === 0 || types.includes(type)) &&
          (one === null || (one.endsWith(".*") ? type.startsWith(one.slice(0, -1)) : type === one)),
      );
      return listPage(rows, params, "/v1/events", (row) => world.render(row));
    },
  },
  {
    method: "GET",
    path: "/v1/events/:id",
    params: [],
    run: ({ world, account, ids }) => world.get(world.events, "event", first(ids), account),
  },
  ...reading<Endpoint>(
    "/v1/webhook_endpoints",
    "webhook endpoint",
    (world) => world.endpoints,
    [],
    PAGE_PARAMS,
  ),
  {
    method: "POST",
    path: "/v1/webhook_endpoints",
    params: ["url", "enabled_events", "description", "metadata", "api_version", "connect"],
    run: ({ world, params }) => {
      const events = params.strings("enabled_events");
      if (events.length === 0)
        throw badParameter("Missing required param: enabled_events.", "enabled_events", "parameter_missing");
      const secret = `whsec_${randomBytes(24).toString("hex")}`;
      const endpoint = newEndpoint(world, {
        url: params.required("url"),
        secret,
        events,
        isConnect: params.flag("connect") ?? false,
        description: params.optional("description"),
        metadata: params.metadata(),
      });
      return { ...(world.render(endpoint) as object), secret };
    },
  },
  describing<Endpoint>(
    "/v1/webhook_endpoints",
    "webhook endpoint",
    (world) => world.endpoints,
    (endpoint, params) => {
      if (params.has("url")) endpoint.url = params.required("url");
      if (params.has("enabled_events")) endpoint.enabled_events = params.strings("enabled_events");
      const disabled = params.flag("disabled");
      if (disabled !== undefined) endpoint.status = disabled ? "disabled" : "enabled";
    },
    ["url", "enabled_events", "disabled", "description"],
  ),
  {
    method: "DELETE",
    path: "/v1/webhook_endpoints/:id",
    params: [],
    run: ({ world, account, ids }) => {
      const { id } = world.get(world.endpoints, "webhook endpoint", first(ids), account);
      world.endpoints.delete(id);
      return { id, object: "webhook_endpoint", deleted: true };
    },
  },
];

type EndpointSeed = {
  id?: string;
  url: string;
  secret: string;
  events: string[];
  isConnect: boolean | null;
  description?: string | null;
  metadata?: Record<string, string>;
};

export function newEndpoint(
  world: World,
  { id, url, secret, events, isConnect, description = null, metadata = {} }: EndpointSeed,
): Endpoint {
  const kept = world.kept("we", PLATFORM);
  return world.save(world.endpoints, {
    ...kept,
    id: id ?? kept.id,
    object: "webhook_endpoint" as const,
    url,
    enabled_events: events,
    status: "enabled" as const,
    description,
    metadata,
    _secrets: [{ secret, untilMs: null }],
    _isConnect: isConnect,
    rest: { api_version: null, application: null, livemode: false },
  });
}

const platformAccount = (world: World): unknown => ({
  id: PLATFORM,
  object: "account",
  charges_enabled: true,
  country: "US",
  created: world.clock.nowSeconds(),
  default_currency: "usd",
  details_submitted: true,
  email: "platform@merestone.example",
  metadata: {},
  payouts_enabled: true,
  type: "standard",
});

function fail(error: Error): never {
  throw error;
}

type Compiled = { route: Route; pattern: RegExp };
const COMPILED: Compiled[] = ROUTES.map((route) => ({
  route,
  pattern: new RegExp(`^${route.path.replace(/:[a-z]+/g, "([^/]+)")}$`),
}));

/** Finds the route, checks the names of its parameters, runs it, and lays out the answer. */
export function runRoute(method: string, path: string, request: Omit<Request, "ids">): unknown {
  for (const { route, pattern } of COMPILED) {
    const found = route.method === method ? pattern.exec(path) : null;
    if (!found) continue;
    const unknown = Object.keys(request.params.form).find(
      (name) => name !== "expand" && !route.params.includes(name),
    );
    if (unknown !== undefined)
      throw badParameter(`Received unknown parameter: ${unknown}`, unknown, "parameter_unknown");
    const result = route.run({ ...request, ids: found.slice(1).map(decodeURIComponent) });
    return expand(request.world, request.world.render(result), request.params);
  }
  throw new StripeError(
    404,
    { type: "invalid_request_error", message: `Unrecognized request URL (${method}: ${path}).` },
    false,
  );
}
