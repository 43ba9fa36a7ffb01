import type { Database, Statement } from "better-sqlite3";
import Stripe from "stripe";
import { openDatabase, setDb, type Db } from "@/db/client";
import { AppError } from "@/lib/errors";
import { setStripe } from "@/lib/services/stripeClient";
import { OPERATIONS } from "./operations";
import type { FromProduct, Outcome, ToProduct, WireAnswer, WireCall } from "./protocol";
import { Random, seedIds } from "./random";

type Options = {
  file: string;
  secretKey: string;
  say: (message: FromProduct) => void;
  /** Called before and after each commit and each call to the outside: where a process may die. */
  point: () => void;
};

/**
 * The product of a simulation: the use cases on a database of their own, that do what they are told and ask the
 * driver for every answer of a hosted service. One at a time in a process.
 */
export class ProductCore {
  private readonly db: Db;
  private readonly dice = new Random([0, 0]);
  private nowMs = 0;
  private calls = 0;
  private readonly answers = new Map<number, (answer: WireAnswer | null) => void>();
  private readonly balances: Statement<
    [],
    { total: number | null; least: number | null; most: number | null }
  >;

  constructor(private readonly options: Options) {
    seedIds(this.dice);
    this.db = openDatabase(options.file);
    // The death of a process takes nothing from the operating system: the disk's patience is not what is tried.
    this.db.$client.pragma("synchronous = OFF");
    wrapCommits(this.db.$client, options.point);
    setDb(this.db);
    const httpClient = Stripe.createFetchHttpClient(this.network("stripe"));
    setStripe(new Stripe(options.secretKey, { httpClient, maxNetworkRetries: 0, telemetry: false }));
    globalThis.fetch = this.network("resend");
    this.balances = this.db.$client.prepare(
      `select sum(balance_cents) as total,
        min(case when kind in ('wallet', 'refunding', 'escrow', 'payable', 'transit') then balance_cents end) as least,
        max(case when kind in ('debt', 'shortfall') then balance_cents end) as most from ledger_accounts`,
    );
  }

  async take(message: ToProduct): Promise<void> {
    this.nowMs = message.nowMs;
    this.dice.reseed(message.entropy);
    if (message.what === "answer") {
      this.answers.get(message.id)?.(message.answer);
      this.answers.delete(message.id);
      return;
    }
    const outcome = await this.attempt(message.operation, message.input);
    this.options.say({ what: "done", id: message.id, outcome, wrong: this.look() });
  }

  close(): void {
    this.db.$client.close();
  }

  private async attempt(operation: string, input: unknown): Promise<Outcome> {
    try {
      const run = OPERATIONS[operation as keyof typeof OPERATIONS] as (
        input: unknown,
        nowMs: number,
        clock: () => number,
      ) => unknown;
      return { ok: true, value: (await run(input, this.nowMs, () => this.nowMs)) ?? null };
    } catch (error) {
      if (error instanceof AppError)
        return { ok: false, why: "refused", code: error.code, message: error.message };
      const message = error instanceof Error ? (error.stack ?? error.message) : String(error);
      return {
        ok: false,
        why: error instanceof Stripe.errors.StripeError ? "upstream" : "bug",
        code: "",
        message,
      };
    }
  }

  /** What must hold after each step and costs next to nothing to see. */
  private look(): string | null {
    const { total, least, most } = this.balances.get() ?? { total: 0, least: 0, most: 0 };
    if ((total ?? 0) !== 0) return `the accounts sum to ${total}`;
    if ((least ?? 0) < 0) return `an account that may not be negative holds ${least}`;
    if ((most ?? 0) > 0) return `a debt is positive: ${most}`;
    return null;
  }

  /** The driver's answer in the place of the network's. */
  private network(service: WireCall["service"]): typeof fetch {
    return async (url, options = {}) => {
      const { pathname, search } = new URL(String(url instanceof Request ? url.url : url));
      const headers: Record<string, string> = {};
      new Headers(options.headers).forEach((value, name) => (headers[name] = value));
      const body = typeof options.body === "string" ? options.body : "";
      this.options.point();
      const id = (this.calls += 1);
      const call = { service, method: options.method ?? "GET", target: pathname + search, headers, body };
      const answer = await new Promise<WireAnswer | null>((resolve) => {
        this.answers.set(id, resolve);
        this.options.say({ what: "call", id, call });
      });
      this.options.point();
      if (!answer) throw new TypeError("the connection was lost");
      return new Response(answer.body, { status: answer.status, headers: answer.headers });
    };
  }
}

/** Puts a point before and after each commit, of a transaction or of a statement on its own. */
function wrapCommits(sqlite: Database, point: () => void): void {
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
  // Each text is prepared once; the product prepares anew each time, which is slow and changes nothing else.
  const kept = new Map<string, Statement>();
  const prepareOnce = (text: string): Statement => {
    const known = kept.get(text);
    if (known) return known.reader ? known.raw(false) : known;
    const statement = prepare(text) as Statement;
    kept.set(text, statement);
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
  Object.assign(sqlite, { transaction: begin, prepare: prepareOnce });
}
