import type { Table } from "../shared/tables";
import { badParameter, invalid, noSuch } from "./errors";
import type { Params } from "./form";
import type { Kept } from "./objects";
import type { World } from "./world";

const LIMIT_MAX = 100;
const LEVELS_MAX = 4;
const RANGES = ["gt", "gte", "lt", "lte"] as const;

/** Parameters that every list takes. */
export const PAGE_PARAMS = ["limit", "starting_after", "ending_before"];
/** Most lists are narrowed by time, too. */
export const LIST_PARAMS = [...PAGE_PARAMS, "created"];

/** A page of rows, newest first, with cursors (https://docs.stripe.com/api/pagination). */
export function listPage<T extends { id: string; created?: number }>(
  rows: T[],
  params: Params,
  url: string,
  render: (row: T) => unknown,
): unknown {
  const limit = params.integer("limit") ?? 10;
  if (limit < 1 || limit > LIMIT_MAX)
    throw badParameter(
      `Invalid integer: limit must be between 1 and ${LIMIT_MAX}.`,
      "limit",
      "parameter_invalid_integer",
    );
  const after = params.optional("starting_after");
  const before = params.optional("ending_before");
  if (after && before)
    throw badParameter(
      "You may only specify one of these parameters: ending_before, starting_after.",
      "ending_before",
    );
  const isInRange = readCreated(params);
  const ordered = rows.filter(({ created = 0 }) => isInRange(created)).reverse();
  const cursor = after ?? before;
  const at = cursor ? ordered.findIndex(({ id }) => id === cursor) : -1;
  if (cursor && at < 0) throw noSuch("object", cursor, after ? "starting_after" : "ending_before");
  const start = before ? Math.max(0, at - limit) : at + 1;
  const end = before ? at : start + limit;
  const hasMore = before ? start > 0 : end < ordered.length;
  return { object: "list", data: ordered.slice(start, end).map(render), has_more: hasMore, url };
}

function readCreated(params: Params): (created: number) => boolean {
  if (!params.has("created")) return () => true;
  const exact = typeof params.form.created === "string" ? params.integer("created") : undefined;
  if (exact !== undefined) return (created) => created === exact;
  const range = params.nested("created");
  const [gt, gte, lt, lte] = RANGES.map((name) => range.integer(name));
  return (created) =>
    (gt === undefined || created > gt) &&
    (gte === undefined || created >= gte) &&
    (lt === undefined || created < lt) &&
    (lte === undefined || created <= lte);
}

/** The rows of an account whose fields have the values that the request names. */
export function matching<T extends Kept>(
  table: Table<T>,
  account: string,
  params: Params,
  fields: readonly (keyof T & string)[],
): T[] {
  const wanted = fields.flatMap((field) => {
    const value = params.optional(field);
    return value === null ? [] : [[field, value] as const];
  });
  return table
    .all()
    .filter(
      (row) => row._account === account && wanted.every(([field, value]) => String(row[field]) === value),
    );
}

/** Fields that hold an id, or the object when it is asked for. */
const EXPANDABLE = new Set([
  "payment_intent",
  "latest_charge",
  "charge",
  "balance_transaction",
  "failure_balance_transaction",
  "transfer",
  "destination",
  "destination_payment",
  "source_transaction",
  "source",
  "customer",
  "payment_method",
  "source_transfer",
  "source_transfer_reversal",
  "transfer_reversal",
  "destination_payment_refund",
  "account",
  "original_payout",
  "reversed_by",
]);

/** Replaces ids by objects along the paths of `expand[]`, through lists by `data.`, four levels at most. */
export function expand(world: World, value: unknown, params: Params): unknown {
  for (const path of params.strings("expand")) {
    const parts = path.split(".");
    if (parts.length > LEVELS_MAX)
      throw invalid(
        `You cannot expand more than ${LEVELS_MAX} levels of a property.`,
        "property_expansion_max_depth",
        "expand",
      );
    expandAlong(world, value, parts, path);
  }
  return value;
}

function expandAlong(world: World, value: unknown, [name, ...rest]: string[], path: string): void {
  if (name === undefined || value === null) return;
  if (Array.isArray(value)) {
    for (const item of value) expandAlong(world, item, [name, ...rest], path);
    return;
  }
  if (!isRecord(value)) return;
  const held = value[name];
  if (name === "line_items" && value.object === "checkout.session")
    value[name] = lineItems(world, String(value.id));
  else if (name === "refunds" && value.object === "charge") value[name] = refundsOf(world, String(value.id));
  else if (typeof held === "string" && EXPANDABLE.has(name)) {
    const found = findById(world, held);
    if (found) value[name] = world.render(found);
  } else if (held === undefined || typeof held === "string") {
    throw invalid(`This property cannot be expanded (${path}).`, undefined, "expand");
  }
  expandAlong(world, value[name], rest, path);
}

const isRecord = (value: unknown): value is Record<string, unknown> =>
  typeof value === "object" && value !== null;

export function lineItems(world: World, sessionId: string): unknown {
  const items = world.sessions.find(sessionId)?._items ?? [];
  return {
    object: "list",
    data: items.map((item) => world.render(item)),
    has_more: false,
    url: `/v1/checkout/sessions/${sessionId}/line_items`,
  };
}

function refundsOf(world: World, chargeId: string): unknown {
  const refunds = world.refunds.all().filter(({ charge }) => charge === chargeId);
  return {
    object: "list",
    data: refunds
      .reverse()
      .slice(0, 10)
      .map((refund) => world.render(refund)),
    has_more: refunds.length > 10,
    url: `/v1/charges/${chargeId}/refunds`,
  };
}

/** Any kept object by the prefix of its id. */
function findById(world: World, id: string): unknown {
  const tables: Record<string, Table<Kept> | { find: (id: string) => Kept | undefined }> = {
    pi: world.intents,
    ch: world.charges,
    py: world.charges,
    re: world.refunds,
    pyr: world.refunds,
    dp: world.disputes,
    txn: world.transactions,
    tr: world.transfers,
    trr: world.reversals,
    po: world.payouts,
    tu: world.topups,
    acct: world.accounts,
    cus: world.customers,
    pm: world.methods,
    cs: world.sessions,
  };
  const [prefix = ""] = id.split("_");
  if (prefix === "ba")
    return world.accounts
      .all()
      .flatMap(({ _banks }) => _banks)
      .find((bank) => bank.id === id);
  return tables[prefix]?.find(id);
}
