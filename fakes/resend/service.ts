import { createHash, createHmac, randomUUID } from "node:crypto";
import path from "node:path";
import { setTimeout as sleep } from "node:timers/promises";
import { Clock } from "../shared/clock";
import { ControlError, control } from "../shared/control";
import { Faults, dropped, type Fault } from "../shared/faults";
import { Documents } from "../shared/tables";
import {
  BodyTooLarge,
  html,
  json,
  readAll,
  redirect,
  type Answer,
  type Call,
  type Core,
} from "../shared/transport";
import { ResendError, bareAddress, readMail, statusOf, type Mail, type MailEvent } from "./mail";
import { boxPage, mailPage } from "./pages";

export type ResendOptions = {
  /** Holds resend.sqlite; null keeps everything in memory. */
  folder: string | null;
  apiKey?: string | undefined;
  webhookUrl?: string | undefined;
  webhookSecret?: string | undefined;
};

export type ResendService = { core: Core; clock: Clock; mails: () => Mail[]; close: () => void };

type KeptAnswer = { digest: string; status: number; body: unknown; atMs: number };

const BODY_BYTES_MAX = 40_000_000;
const BATCH_MAX = 100;
const KEY_CHARACTERS_MAX = 256;
const KEY_LIFETIME_MS = 86_400_000;
const WAIT_MS_MAX = 30_000;

/** The mail service of this machine: takes what the SDK sends, keeps it, and shows it in a mailbox. */
export function createResend(options: ResendOptions): ResendService {
  const clock = new Clock();
  const faults = new Faults();
  const documents = new Documents(
    options.folder === null ? null : path.join(options.folder, "resend.sqlite"),
  );
  const mails = documents.table<Mail>("mail");
  const keys = documents.table<KeptAnswer>("key");
  const inProgress = new Set<string>();
  const settings = { failNext: 0, perSecond: 0 };
  let arrivals: number[] = [];

  return { core, clock, mails: () => mails.all(), close: () => documents.close() };

  async function core(call: Call): Promise<Answer> {
    try {
      const [, place = "", id = "", verb = ""] = call.path.split("/");
      if (place === "_control") return await control(call, verbs());
      if (place === "emails") return await api(call, id, verb);
      if (place === "api" && id === "mails") return await listForTests(new URLSearchParams(call.query));
      if (place === "" && call.method === "GET")
        return html(
          200,
          boxPage(
            search(new URLSearchParams(call.query).get("search") ?? ""),
            new URLSearchParams(call.query).get("search") ?? "",
            settings.failNext,
          ),
        );
      if (place === "mail" && call.method === "GET") {
        const mail = mails.find(id);
        return html(mail ? 200 : 404, mail ? mailPage(mail) : boxPage([], "", settings.failNext));
      }
      if (call.method === "POST" && isOwnPage(call)) {
        if (place === "fail-next") {
          settings.failNext += 1;
          return redirect("/");
        }
        const mail = mails.find(id);
        if (place === "mail" && mail && (verb === "bounce" || verb === "complain")) {
          happen(mail, verb === "bounce" ? "email.bounced" : "email.complained");
          return redirect(`/mail/${id}`);
        }
      }
      throw new ResendError(404, "not_found", "The requested endpoint does not exist.");
    } catch (error) {
      if (error instanceof BodyTooLarge)
        return refusal(new ResendError(413, "validation_error", "The letter is too large."));
      if (!(error instanceof ResendError)) throw error;
      return refusal(error);
    } finally {
      documents.commit();
    }
  }

  function isOwnPage({ headers }: Call): boolean {
    return headers.origin === undefined || headers.origin === `http://${headers.host ?? ""}`;
  }

  function refusal({ status, code, message, headers }: ResendError): Answer {
    return json(status, { statusCode: status, name: code, message }, headers);
  }

  async function api(call: Call, id: string, verb: string): Promise<Answer> {
    const before = await faults.strike(call, "before");
    if (before) return spoil(before);
    authorize(call);
    limitRate();
    const answer = await perform(call, id, verb);
    const after = await faults.strike(call, "after");
    return after ? spoil(after) : answer;
  }

  function spoil({ action, status, headers }: Fault): Answer {
    if (action === "drop") return dropped;
    const code = status === 429 ? "rate_limit_exceeded" : "internal_server_error";
    return refusal(
      new ResendError(
        status,
        code,
        "The stand-in was told to fail.",
        status === 429 ? { "retry-after": "1", ...headers } : headers,
      ),
    );
  }

  function authorize({ headers }: Call): void {
    const key = /^Bearer (.+)$/.exec(headers.authorization ?? "")?.[1];
    if (!key)
      throw new ResendError(
        401,
        "missing_api_key",
        'Missing API key in the authorization header. Include the following header in the request: "Authorization: Bearer YOUR_API_KEY"',
      );
    const isRight = options.apiKey === undefined ? key.startsWith("re_") : key === options.apiKey;
    if (!isRight) throw new ResendError(403, "invalid_api_key", "API key is invalid");
  }

  function limitRate(): void {
    if (settings.perSecond === 0) return;
    const nowMs = clock.nowMs();
    arrivals = arrivals.filter((atMs) => atMs > nowMs - 1000);
    if (arrivals.length >= settings.perSecond) {
      throw new ResendError(
        429,
        "rate_limit_exceeded",
        `Too many requests. You can only make ${settings.perSecond} requests per second.`,
        {
          "retry-after": "1",
          "ratelimit-limit": String(settings.perSecond),
          "ratelimit-remaining": "0",
          "ratelimit-reset": "1",
        },
      );
    }
    arrivals.push(nowMs);
  }

  async function perform(call: Call, id: string, verb: string): Promise<Answer> {
    if (call.method === "POST" && (id === "" || (id === "batch" && verb === "")))
      return sendOnce(call, id === "batch");
    if (call.method === "GET" && id !== "") {
      const mail = mails.find(id);
      if (!mail) throw new ResendError(404, "not_found", "Email not found");
      return json(200, {
        object: "email",
        ...summary(mail),
        html: mail.html,
        text: mail.text,
        tags: mail.tags,
      });
    }
    if (call.method === "GET")
      return json(200, {
        object: "list",
        has_more: false,
        data: mails.all().reverse().slice(0, 100).map(summary),
      });
    throw new ResendError(
      405,
      "method_not_allowed",
      "This endpoint does not support the specified HTTP method.",
    );
  }

  function summary(mail: Mail): Record<string, unknown> {
    const { id, to, from, subject, bcc, cc } = mail;
    return {
      id,
      to,
      from,
      created_at: mail.createdAt,
      subject,
      bcc,
      cc,
      reply_to: mail.replyTo,
      last_event: statusOf(mail),
      scheduled_at: null,
    };
  }

  async function sendOnce(call: Call, isBatch: boolean): Promise<Answer> {
    const body = await readAll(call.body, BODY_BYTES_MAX);
    const key = call.headers["idempotency-key"];
    if (key === undefined) return send(body, isBatch, null);
    if (key === "" || key.length > KEY_CHARACTERS_MAX)
      throw new ResendError(
        400,
        "invalid_idempotency_key",
        `The idempotency key must be between 1-${KEY_CHARACTERS_MAX} chars.`,
      );
    const digest = createHash("sha256").update(call.path).update(body).digest("hex");
    const kept = keys.find(key);
    if (kept && clock.nowMs() - kept.atMs < KEY_LIFETIME_MS) {
      if (kept.digest !== digest)
        throw new ResendError(
          409,
          "invalid_idempotent_request",
          "This idempotency key has been used on a request that has a different body.",
        );
      return json(kept.status, kept.body);
    }
    if (inProgress.has(key))
      throw new ResendError(
        409,
        "concurrent_idempotent_requests",
        "Another request with the same idempotency key is in progress.",
      );
    inProgress.add(key);
    try {
      const inside = await faults.strike(call, "inside");
      if (inside) return spoil(inside);
      const answer = send(body, isBatch, key);
      keys.put(key, {
        digest,
        status: answer.status,
        body: JSON.parse(String(answer.body)),
        atMs: clock.nowMs(),
      });
      return answer;
    } finally {
      inProgress.delete(key);
    }
  }

  function send(body: Buffer, isBatch: boolean, idempotencyKey: string | null): Answer {
    if (settings.failNext > 0) {
      settings.failNext -= 1;
      throw new ResendError(500, "internal_server_error", "The stand-in was told to fail.");
    }
    let given: unknown;
    try {
      given = JSON.parse(body.toString("utf8"));
    } catch {
      throw new ResendError(422, "validation_error", "The body is not JSON.");
    }
    if (isBatch && (!Array.isArray(given) || given.length === 0 || given.length > BATCH_MAX))
      throw new ResendError(422, "validation_error", `A batch is an array of 1 to ${BATCH_MAX} letters.`);
    const letters: unknown[] = isBatch && Array.isArray(given) ? given : [given];
    // All are read before one is kept: a batch is taken whole or not at all.
    const made = letters.map((letter) =>
      readMail(letter, {
        id: randomUUID(),
        createdAt: new Date(clock.nowMs()).toISOString(),
        idempotencyKey,
      }),
    );
    for (const mail of made) {
      mails.put(mail.id, mail);
      happen(mail, "email.sent");
      // Resend's own test addresses (https://resend.com/docs/dashboard/emails/send-test-emails).
      const addressed = (name: string): boolean =>
        mail.to.some((to) => bareAddress(to) === `${name}@resend.dev`);
      happen(mail, addressed("bounced") ? "email.bounced" : "email.delivered");
      if (addressed("complained")) happen(mail, "email.complained");
    }
    return json(200, isBatch ? { data: made.map(({ id }) => ({ id })) } : { id: made[0]?.id });
  }

  function happen(mail: Mail, type: MailEvent["type"]): void {
    mail.events.push({ type, at: new Date(clock.nowMs()).toISOString() });
    mails.put(mail.id, mail);
    if (options.webhookUrl) void deliver(options.webhookUrl, mail, type);
  }

  async function deliver(url: string, mail: Mail, type: string): Promise<void> {
    const body = JSON.stringify({
      type,
      created_at: new Date(clock.nowMs()).toISOString(),
      data: {
        email_id: mail.id,
        ...summary(mail),
        tags: Object.fromEntries(mail.tags.map(({ name, value }) => [name, value])),
      },
    });
    const id = `msg_${randomUUID().replaceAll("-", "")}`;
    for (let attempt = 0; attempt < 6; attempt += 1) {
      const headers = {
        "content-type": "application/json",
        ...signStandardWebhook(options.webhookSecret ?? "", id, Math.floor(clock.nowMs() / 1000), body),
      };
      const answer = await fetch(url, {
        method: "POST",
        headers,
        body,
        redirect: "manual",
        signal: AbortSignal.timeout(10_000),
      }).catch(() => null);
      if (answer?.ok) return;
      await sleep(500 * 2 ** attempt, undefined, { ref: false });
    }
  }

  /** Newest first, by any part of a recipient's address. */
  function search(recipient: string): Mail[] {
    const wanted = recipient.trim().toLowerCase();
    return mails
      .all()
      .filter(({ to, cc, bcc }) =>
        [...to, ...cc, ...bcc].some((address) => address.toLowerCase().includes(wanted)),
      )
      .reverse();
  }

  /** `to`, `subject` (part of it), `tag` ("name:value"); with `waitMs` the answer waits for a first letter. */
  async function listForTests(query: URLSearchParams): Promise<Answer> {
    const subject = (query.get("subject") ?? "").toLowerCase();
    const tag = query.get("tag");
    const find = (): Mail[] =>
      search(query.get("to") ?? "").filter(
        (mail) =>
          mail.subject.toLowerCase().includes(subject) &&
          (tag === null || mail.tags.some(({ name, value }) => `${name}:${value}` === tag)),
      );
    const deadline = Date.now() + Math.min(WAIT_MS_MAX, Number(query.get("waitMs") ?? 0));
    let found = find();
    while (found.length === 0 && Date.now() < deadline) {
      await sleep(25);
      found = find();
    }
    return json(200, {
      mails: found
        .slice(0, Number(query.get("limit") ?? 200))
        .map((mail) => ({ ...mail, status: statusOf(mail), links: linksOf(mail) })),
    });
  }

  function verbs(): Record<string, (input: Record<string, unknown>) => unknown> {
    return {
      reset: () => {
        documents.reset();
        faults.control({ clear: true });
        clock.reset();
        Object.assign(settings, { failNext: 0, perSecond: 0 });
      },
      clock: (input) => clock.control(input),
      fault: (input) => faults.control(input),
      settings: (input) => {
        for (const name of ["failNext", "perSecond"] as const)
          if (typeof input[name] === "number") settings[name] = input[name];
        return settings;
      },
      mail: ({ id, event }) => {
        const mail = mails.find(String(id));
        if (!mail) throw new ControlError(404, { error: "no such mail" });
        const type = (["email.bounced", "email.complained", "email.failed", "email.delivered"] as const).find(
          (name) => name === event,
        );
        if (!type)
          throw new RangeError("event is email.bounced, email.complained, email.failed or email.delivered");
        happen(mail, type);
        return { ...mail, status: statusOf(mail) };
      },
    };
  }
}

/** Every address that the letter links to, in order, for tests that follow a magic link. */
function linksOf({ html: source, text }: Mail): string[] {
  const inHtml = [...source.matchAll(/href="(https?:[^"]+)"/g)].map(([, url = ""]) =>
    url.replaceAll("&amp;", "&").replaceAll("&#x3D;", "="),
  );
  const inText = [...text.matchAll(/https?:\/\/[^\s<>"]+/g)].map(([url]) => url);
  return [...new Set([...inHtml, ...inText])];
}

/** The headers of Standard Webhooks 1.0.0: HMAC-SHA256 over "id.timestamp.body" with the decoded secret. */
export function signStandardWebhook(
  secret: string,
  id: string,
  atSeconds: number,
  body: string,
): Record<string, string> {
  const key = Buffer.from(secret.replace(/^whsec_/, ""), "base64");
  const signature = `v1,${createHmac("sha256", key).update(`${id}.${atSeconds}.${body}`).digest("base64")}`;
  const fields = { id, timestamp: String(atSeconds), signature };
  // Resend sends the same three under the older svix- names.
  return Object.fromEntries(
    ["webhook", "svix"].flatMap((prefix) =>
      Object.entries(fields).map(([name, value]) => [`${prefix}-${name}`, value]),
    ),
  );
}
