import { createHash } from "node:crypto";
import path from "node:path";
import { Clock } from "../shared/clock";
import { ControlError, control } from "../shared/control";
import { Faults, dropped, type Fault } from "../shared/faults";
import { Documents } from "../shared/tables";
import { json, readAll, type Answer, type Call, type Core } from "../shared/transport";
import { BANKS } from "./cards";
import {
  activateAccount,
  completeOnboarding,
  failPayout,
  finishPayout,
  restrictAccount,
  sendPayout,
} from "./connect";
import { closeDispute, openDispute } from "./disputes";
import { StripeError } from "./errors";
import { Params, parseForm } from "./form";
import type { Account } from "./objects";
import { answerPage } from "./pages";
import { expireSession, failRefund, finishRefund, paySession } from "./payments";
import { newEndpoint, runRoute } from "./routes";
import { Webhooks, type Deliver } from "./webhooks";
import { API_VERSION, PLATFORM, World, type Settings, type Timer } from "./world";

export type StripeOptions = Partial<Settings> & {
  /** Holds stripe.sqlite; null keeps everything in memory. */
  folder: string | null;
  /** Where events go; none are sent without one, unless the API makes an endpoint. */
  webhookUrl?: string | undefined;
  webhookSecret?: string | undefined;
  /** The key that is taken; any test key where it is left out. */
  secretKey?: string | undefined;
  /** How events are handed over, for tests without a socket. */
  deliver?: Deliver | undefined;
  random?: (() => number) | undefined;
  /** Whether time passes by `tick` alone, for histories that must replay exactly. */
  isManual?: boolean | undefined;
};

export type StripeService = {
  core: Core;
  clock: Clock;
  world: World;
  webhooks: Webhooks;
  /** The address that its pages and links carry; set when the port is known. */
  setBaseUrl: (url: string) => void;
  /** Lets everything happen that is due, and delivers what is due. */
  tick: () => Promise<void>;
  /** Lets everything happen that is under way, whenever it is due, and delivers all events. */
  settle: () => Promise<void>;
  close: () => void;
};

const KEY_LIFETIME_MS = 86_400_000;
const REQUESTS_KEPT = 500;
const TICK_MS = 100;
/** A settled world is quiet after a few rounds; a webhook that is never taken must not hold it up. */
const SETTLE_ROUNDS_MAX = 8;
const SLOW_TIMERS = new Set(["expire-session", "lapse-dispute"]);

/**
 * The Stripe of this machine: the objects and flows that a market of separate charges and transfers needs, with
 * Stripe's states, errors and idempotency, balances that are the sum of their transactions, signed webhooks
 * that are tried again, and plain pages for people. Time is the clock's.
 */
export function createStripe(options: StripeOptions): StripeService {
  const clock = new Clock();
  const faults = new Faults();
  const documents = new Documents(
    options.folder === null ? null : path.join(options.folder, "stripe.sqlite"),
  );
  const { settleMs = 0, payoutStepMs = 200, verifyMs = 0, disputeFeeCents = 1500 } = options;
  const world = new World(documents, clock, { settleMs, payoutStepMs, verifyMs, disputeFeeCents });
  const webhooks = new Webhooks(world, options.deliver, options.random);
  world.onEvent = webhooks.enqueue;
  for (const [scope, { atMs }] of world.keys.entries())
    if (clock.nowMs() - atMs > KEY_LIFETIME_MS) world.keys.delete(scope);
  configureEndpoint();
  const requests: {
    method: string;
    path: string;
    account: string;
    key: string | null;
    params: unknown;
    status: number;
  }[] = [];
  const inProgress = new Set<string>();
  const timer = options.isManual
    ? undefined
    : setInterval(() => void tick().catch((error: unknown) => console.error(error)), TICK_MS).unref();

  return {
    core,
    clock,
    world,
    webhooks,
    setBaseUrl: (url) => (world.baseUrl = url),
    tick,
    settle,
    close: () => {
      clearInterval(timer);
      documents.close();
    },
  };

  function configureEndpoint(): void {
    const id = "we_configured";
    world.endpoints.delete(id);
    if (options.webhookUrl)
      newEndpoint(world, {
        id,
        url: options.webhookUrl,
        secret: options.webhookSecret ?? "whsec_local",
        events: ["*"],
        isConnect: null,
      });
    documents.commit();
  }

  async function core(call: Call): Promise<Answer> {
    if (call.path.startsWith("/_control/")) {
      try {
        return await control(call, verbs());
      } catch (error) {
        if (!(error instanceof StripeError)) throw error;
        return errorAnswer(error);
      } finally {
        documents.commit();
      }
    }
    if (call.path.startsWith("/v1/")) return answerApi(call);
    const answer = await answerPage(call, world);
    documents.commit();
    return (
      answer ??
      json(404, {
        error: {
          type: "invalid_request_error",
          message: `Unrecognized request URL (${call.method}: ${call.path}).`,
        },
      })
    );
  }

  async function answerApi(call: Call): Promise<Answer> {
    const requestId = world.id("req");
    const headers = { "request-id": requestId, "stripe-version": API_VERSION };
    const before = await faults.strike(call, "before");
    if (before) return spoil(before, headers);
    const answer = await perform(call, requestId);
    const after = await faults.strike(call, "after");
    return after ? spoil(after, headers) : { ...answer, headers: { ...headers, ...answer.headers } };
  }

  function spoil({ action, status, headers: extra }: Fault, headers: Record<string, string>): Answer {
    if (action === "drop") return dropped;
    const type =
      status === 429 ? { type: "invalid_request_error", code: "rate_limit" } : { type: "api_error" };
    return json(
      status,
      { error: { ...type, message: "The stand-in was told to fail." } },
      { ...headers, ...extra },
    );
  }

  async function perform(call: Call, requestId: string): Promise<Answer> {
    const refusal = authorize(call);
    if (refusal) return refusal;
    const body = call.method === "GET" ? call.query : (await readAll(call.body)).toString("utf8");
    const account = call.headers["stripe-account"] ?? PLATFORM;
    if (account !== PLATFORM && !world.accounts.find(account)) {
      return errorAnswer(
        new StripeError(403, {
          type: "invalid_request_error",
          code: "account_invalid",
          message: `The provided key does not have access to account '${account}' (or that account does not exist). Application access may have been revoked.`,
        }),
      );
    }
    const key = call.method === "POST" ? (call.headers["idempotency-key"] ?? null) : null;
    const note = (status: number) => {
      requests.push({ method: call.method, path: call.path, account, key, params: safeParams(body), status });
      if (requests.length > REQUESTS_KEPT) requests.shift();
    };
    if (key === null) {
      const { answer } = await execute(call, body, account, null, requestId);
      note(answer.status);
      return answer;
    }
    const answer = await performOnce(call, body, account, key, requestId);
    note(answer.status);
    return answer;
  }

  /** Idempotency (https://docs.stripe.com/api/idempotent_requests): kept once execution begins, failures too. */
  async function performOnce(
    call: Call,
    body: string,
    account: string,
    key: string,
    requestId: string,
  ): Promise<Answer> {
    if (key.length > 255)
      return errorAnswer(
        new StripeError(400, {
          type: "idempotency_error",
          message: "Idempotency keys have at most 255 characters.",
        }),
      );
    const scope = `${account}\0${key}`;
    const digest = createHash("sha256").update(`${call.method} ${call.path}\n${body}`).digest("hex");
    const kept = world.keys.find(scope);
    if (kept && clock.nowMs() - kept.atMs < KEY_LIFETIME_MS) {
      if (kept.digest !== digest) {
        return json(400, {
          error: {
            type: "idempotency_error",
            message: `Keys for idempotent requests can only be used with the same parameters they were first used with. Try using a key other than '${key}' if you meant to execute a different request.`,
          },
        });
      }
      return json(kept.status, kept.body, { "idempotent-replayed": "true" });
    }
    if (inProgress.has(scope)) {
      return json(409, {
        error: {
          type: "invalid_request_error",
          code: "idempotency_key_in_use",
          message: `There is currently another in-progress request using this Idempotency Key (${key}).`,
        },
      });
    }
    inProgress.add(scope);
    try {
      const { answer, value, isKept } = await execute(call, body, account, key, requestId);
      if (isKept) world.keys.put(scope, { digest, status: answer.status, body: value, atMs: clock.nowMs() });
      // In the same commit as what the request did: a crash keeps both or neither.
      documents.commit();
      return answer;
    } finally {
      inProgress.delete(scope);
    }
  }

  async function execute(
    call: Call,
    body: string,
    account: string,
    key: string | null,
    requestId: string,
  ): Promise<{ answer: Answer; value: unknown; isKept: boolean }> {
    const inside = await faults.strike(call, "inside");
    if (inside) {
      const value = { error: { type: "api_error", message: "An unknown error occurred." } };
      return { answer: json(inside.status, value), value, isKept: true };
    }
    world.request = { id: requestId, key };
    try {
      const value = runRoute(call.method, call.path, { world, params: new Params(parseForm(body)), account });
      if (key === null) documents.commit();
      return { answer: json(200, value), value, isKept: true };
    } catch (error) {
      if (!(error instanceof StripeError)) throw error;
      if (key === null) documents.commit(); // a decline changes the payment it belongs to
      const value = errorBody(error);
      return { answer: json(error.status, value), value, isKept: error.isKept };
    } finally {
      world.request = null;
    }
  }

  function errorBody({ body }: StripeError): unknown {
    const { payment_intent: intent, ...rest } = body;
    return {
      error: {
        ...rest,
        ...(intent !== undefined && { payment_intent: world.render(intent) }),
        request_log_url: `${world.baseUrl}/`,
      },
    };
  }

  function errorAnswer(error: StripeError): Answer {
    return json(error.status, errorBody(error));
  }

  function authorize({ headers }: Call): Answer | null {
    const [scheme, value = ""] = (headers.authorization ?? "").split(" ");
    const key =
      scheme === "Basic"
        ? (Buffer.from(value, "base64").toString("utf8").split(":")[0] ?? "")
        : scheme === "Bearer"
          ? value
          : "";
    if (key === "") {
      return json(401, {
        error: {
          type: "invalid_request_error",
          message:
            "You did not provide an API key. You need to provide your API key in the Authorization header, using Bearer auth (e.g. 'Authorization: Bearer YOUR_SECRET_KEY').",
        },
      });
    }
    const isRight = options.secretKey === undefined ? /^(sk|rk)_test_/.test(key) : key === options.secretKey;
    if (isRight) return null;
    // A live key here is a mistake with real money: it is named as one, and never repeated.
    const message = /^(sk|rk)_live_/.test(key)
      ? "A live key was sent to the local stand-in. Nothing was charged; roll the key."
      : `Invalid API Key provided: ${key.slice(0, 8)}****`;
    return json(401, { error: { type: "invalid_request_error", message } });
  }

  function happen({ kind, subject }: Timer): void {
    switch (kind) {
      case "expire-session":
        return ifFound(
          world.sessions.find(subject),
          (session) => session.status === "open" && void expireSession(world, session),
        );
      case "send-payout":
        return ifFound(world.payouts.find(subject), (payout) => sendPayout(world, payout));
      case "finish-payout":
        return ifFound(world.payouts.find(subject), (payout) => finishPayout(world, payout));
      case "activate-account":
        return ifFound(world.accounts.find(subject), (account) => activateAccount(world, account));
      case "finish-refund":
        return ifFound(world.refunds.find(subject), (refund) => finishRefund(world, refund));
      case "fail-refund":
        return ifFound(world.refunds.find(subject), (refund) => failRefund(world, refund));
      case "win-dispute":
      case "lose-dispute":
        return ifFound(
          world.disputes.find(subject),
          (dispute) => void closeDispute(world, dispute, kind === "win-dispute" ? "won" : "lost"),
        );
      case "lapse-dispute":
        return ifFound(
          world.disputes.find(subject),
          (dispute) => dispute.status === "needs_response" && void closeDispute(world, dispute, "lost"),
        );
    }
  }

  function runTimers(fits: (timer: Timer) => boolean): void {
    const due = world.timers
      .all()
      .filter(fits)
      .sort((a, b) => a.dueMs - b.dueMs);
    for (const entry of due) {
      world.timers.delete(entry.id);
      happen(entry);
    }
    documents.commit();
  }

  async function tick(): Promise<void> {
    const nowMs = clock.nowMs();
    runTimers(({ dueMs }) => dueMs <= nowMs);
    await webhooks.run();
  }

  async function settle(): Promise<void> {
    for (let round = 0; round < SETTLE_ROUNDS_MAX; round += 1) {
      runTimers(({ kind }) => !SLOW_TIMERS.has(kind));
      await webhooks.run(true);
      const isQuiet =
        world.timers.all().every(({ kind }) => SLOW_TIMERS.has(kind)) && webhooks.pending().length === 0;
      if (isQuiet) return;
    }
  }

  function verbs(): Record<string, (input: Record<string, unknown>) => unknown> {
    const accountNamed = ({ account }: Record<string, unknown>): Account =>
      world.accounts.find(String(account)) ?? fail(404, "no such account");
    return {
      reset: () => {
        world.reset();
        requests.length = 0;
        clock.reset();
        faults.control({ clear: true });
        configureEndpoint();
      },
      clock: async (input) => {
        const result = clock.control(input);
        await tick();
        return result;
      },
      fault: (input) => faults.control(input),
      settings: (input) => {
        for (const name of ["settleMs", "payoutStepMs", "verifyMs", "disputeFeeCents"] as const)
          if (typeof input[name] === "number") world.settings[name] = input[name];
        return world.settings;
      },
      settle: async () => {
        await settle();
        return { timers: world.timers.all(), pending: webhooks.pending() };
      },
      requests: () => ({ requests }),
      balance: ({ account = PLATFORM }) => {
        const { available, pending } = world.balance(String(account));
        return { platform: available + pending, available, pending, transactions: world.transactions.size };
      },
      /** All balances beside the sums of their transactions: they must agree. */
      audit: () => ({ accounts: auditBalances() }),
      "pay-session": ({ id, card = "4242424242424242" }) => {
        const session = world.sessions.find(String(id)) ?? fail(404, "no such session");
        const paid = paySession(world, session, String(card).replace(/\D/g, ""), true);
        if (paid.result === "declined") throw new ControlError(402, { error: paid.message, code: paid.code });
        if (paid.result === "closed")
          throw new ControlError(409, { error: `the session is ${session.status}` });
        return world.render(session);
      },
      "expire-session": ({ id }) =>
        world.render(expireSession(world, world.sessions.find(String(id)) ?? fail(404, "no such session"))),
      "complete-onboarding": (input) => {
        const bank = String(input.bank ?? "000123456789");
        if (!(bank in BANKS))
          throw new ControlError(422, { error: "no such test bank", known: Object.keys(BANKS) });
        const account = accountNamed(input);
        completeOnboarding(world, account, bank);
        return world.render(account);
      },
      account: (input) => {
        const account = accountNamed(input);
        if (input.state === "active") activateAccount(world, account);
        else if (input.state === "restricted") restrictAccount(world, account);
        else throw new RangeError("state is active or restricted");
        return world.render(account);
      },
      payout: ({ id, outcome, code = "no_account" }) => {
        const payout = world.payouts.find(String(id)) ?? fail(404, "no such payout");
        if (outcome === "failed")
          failPayout(world, payout, { code: String(code), message: "The bank sent the payout back." });
        else if (outcome === "paid") {
          sendPayout(world, payout);
          finishPayout(world, payout);
        } else throw new RangeError("outcome is paid or failed");
        return world.render(payout);
      },
      dispute: ({ id, charge, outcome, reason }) => {
        if (charge !== undefined)
          return world.render(
            openDispute(
              world,
              world.charges.find(String(charge)) ?? fail(404, "no such charge"),
              String(reason ?? "fraudulent"),
            ),
          );
        if (outcome !== "won" && outcome !== "lost") throw new RangeError("outcome is won or lost");
        return world.render(
          closeDispute(world, world.disputes.find(String(id)) ?? fail(404, "no such dispute"), outcome),
        );
      },
      webhooks: (input) => webhooks.control(input),
      "webhooks/flush": async () => {
        await webhooks.run(true);
        return { left: webhooks.pending().length, pending: webhooks.pending() };
      },
      "webhooks/resend": ({ event }) => ({
        resent: webhooks.resend(event === undefined ? undefined : String(event)),
      }),
      "webhooks/roll-secret": ({ secret, overlapMs = 86_400_000 }) => {
        const endpoint =
          world.endpoints.find("we_configured") ?? fail(404, "no webhook address is configured");
        for (const old of endpoint._secrets) old.untilMs ??= clock.nowMs() + Number(overlapMs);
        endpoint._secrets.push({ secret: String(secret), untilMs: null });
        world.save(world.endpoints, endpoint);
      },
    };
  }

  function auditBalances(): { account: string; balance: number; sum: number }[] {
    const sums = new Map<string, number>([[PLATFORM, 0]]);
    for (const { _account, net } of world.transactions.values())
      sums.set(_account, (sums.get(_account) ?? 0) + net);
    return [...sums].map(([account, sum]) => {
      const { available, pending } = world.balance(account);
      return { account, balance: available + pending, sum };
    });
  }
}

const ifFound = <T>(row: T | undefined, act: (row: T) => unknown): void =>
  void (row !== undefined && act(row));

function fail(status: number, error: string): never {
  throw new ControlError(status, { error });
}

function safeParams(body: string): unknown {
  try {
    return parseForm(body);
  } catch {
    return {};
  }
}
