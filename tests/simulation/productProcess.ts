import type { Database, Statement } from "better-sqlite3";
import Stripe from "stripe";
import { openDatabase, setDb } from "@/db/client";
import { AppError } from "@/lib/errors";
import { setStripe } from "@/lib/services/stripeClient";
import { OPERATIONS } from "./operations";
import type { FromProduct, Outcome, ToProduct, WireAnswer, WireCall } from "./protocol";
import { Random, seedIds } from "./random";

/**
 * The product of a simulation: a process with the database's connection, that does what it is told, asks the
 * driver for every answer of a hosted service, and kills itself where it was told to.
 */
const [file = "", secretKey = ""] = process.argv.slice(2);
const dice = new Random([0, 0]);
let nowMs = 0;
let pointsLeft = Infinity;
const answers = new Map<number, (answer: WireAnswer | null) => void>();
let calls = 0;

/** A place at which a process may die: before and after each commit, and each call to the outside. */
function point(): void {
  pointsLeft -= 1;
  if (pointsLeft <= 0) process.kill(process.pid, "SIGKILL");
}

const say = (message: FromProduct): void => void process.send?.(message);

seedIds(dice);
const db = openDatabase(file);
// The death of a process takes nothing from the operating system: the disk's patience is not what is tried.
db.$client.pragma("synchronous = OFF");
wrapCommits(db.$client);
setDb(db);
setStripe(
  new Stripe(secretKey, {
    httpClient: Stripe.createFetchHttpClient(send("stripe")),
    maxNetworkRetries: 0,
    telemetry: false,
  }),
);
globalThis.fetch = send("resend");
const balances = db.$client.prepare<[], { total: number | null; least: number | null; most: number | null }>(
  `select sum(balance_cents) as total,
    min(case when kind in ('wallet', 'refunding', 'escrow', 'payable', 'transit') then balance_cents end) as least,
    max(case when kind in ('debt', 'shortfall') then balance_cents end) as most from ledger_accounts`,
);
process.on("message", (message: ToProduct) => void take(message));
process.on("disconnect", () => process.exit(0));
say({ what: "ready" });

async function take(message: ToProduct): Promise<void> {
  nowMs = message.nowMs;
  dice.reseed(message.entropy);
  if (message.killAt !== undefined) pointsLeft = message.killAt;
  if (message.what === "answer") {
    answers.get(message.id)?.(message.answer);
    answers.delete(message.id);
    return;
  }
  const outcome = await attempt(message.operation, message.input);
  say({ what: "done", id: message.id, outcome, wrong: look() });
}

async function attempt(operation: string, input: unknown): Promise<Outcome> {
  try {
    const run = OPERATIONS[operation as keyof typeof OPERATIONS] as (
      input: unknown,
      nowMs: number,
      clock: () => number,
    ) => unknown;
    return { ok: true, value: (await run(input, nowMs, () => nowMs)) ?? null };
  } catch (error) {
    if (error instanceof AppError)
      return { ok: false, why: "refused", code: error.code, message: error.message };
    const message = error instanceof Error ? `${error.name}: ${error.message}` : String(error);
    const why = error instanceof Stripe.errors.StripeError ? "upstream" : "bug";
    return {
      ok: false,
      why,
      code: "",
      message: why === "bug" && error instanceof Error ? (error.stack ?? message) : message,
    };
  }
}

/** What must hold after each step and costs next to nothing to see. */
function look(): string | null {
  const { total, least, most } = balances.get() ?? { total: 0, least: 0, most: 0 };
  if ((total ?? 0) !== 0) return `the accounts sum to ${total}`;
  if ((least ?? 0) < 0) return `an account that may not be negative holds ${least}`;
  if ((most ?? 0) > 0) return `a debt is positive: ${most}`;
  return null;
}

/** The driver's answer in the place of the network's. */
function send(service: WireCall["service"]): typeof fetch {
  return async (url, options = {}) => {
    const { pathname, search } = new URL(String(url instanceof Request ? url.url : url));
    const headers: Record<string, string> = {};
    new Headers(options.headers).forEach((value, name) => (headers[name] = value));
    const body = typeof options.body === "string" ? options.body : "";
    point();
    const id = (calls += 1);
    say({
      what: "call",
      id,
      call: { service, method: options.method ?? "GET", target: pathname + search, headers, body },
    });
    const answer = await new Promise<WireAnswer | null>((resolve) => answers.set(id, resolve));
    point();
    if (!answer) throw new TypeError("the connection was lost");
    return new Response(answer.body, { status: answer.status, headers: answer.headers });
  };
}

/** Puts a point before and after each commit, of a transaction or of a statement on its own. */
function wrapCommits(sqlite: Database): void {
  const transaction = sqlite.transaction.bind(sqlite);
  const begin = (work: (...input: unknown[]) => unknown) => {
    const made = transaction((...input: unknown[]) => {
      const value = work(...input);
      point();
      return value;
    });
    const after =
      (run: (...input: unknown[]) => unknown) =>
      (...input: unknown[]) => {
        const value = run(...input);
        point();
        return value;
      };
    return Object.assign(after(made), {
      default: after(made.default),
      deferred: after(made.deferred),
      immediate: after(made.immediate),
      exclusive: after(made.exclusive),
    });
  };
  const prepare = sqlite.prepare.bind(sqlite);
  const prepareWrapped = (text: string): Statement => {
    const statement = prepare(text) as Statement;
    if (statement.readonly) return statement;
    const run = statement.run.bind(statement);
    statement.run = (...input) => {
      if (sqlite.inTransaction) return run(...input);
      point();
      const value = run(...input);
      point();
      return value;
    };
    return statement;
  };
  Object.assign(sqlite, { transaction: begin, prepare: prepareWrapped });
}
