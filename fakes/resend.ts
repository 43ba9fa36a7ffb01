import { existsSync, mkdirSync, readFileSync, renameSync, writeFileSync } from "node:fs";
import { randomUUID } from "node:crypto";
import type { Server } from "node:http";
import path from "node:path";
import { escapeHtml, page, readBody, sendHtml, sendJson, serve, type Call } from "./http";

export type ResendOptions = { port: number; folder: string };

type Mail = { id: string; from: string; to: string[]; subject: string; html: string; text: string; tags: { name: string; value: string }[]; idempotencyKey: string | null; createdAt: string; status: "delivered" | "bounced" };

/** The mail service of this machine: takes what the SDK sends, and shows it in a mailbox. */
export function startResend({ port, folder }: ResendOptions): Promise<Server> {
  const file = path.resolve(folder, "mail.json");
  mkdirSync(path.dirname(file), { recursive: true });
  const mails: Mail[] = existsSync(file) ? (JSON.parse(readFileSync(file, "utf8")) as Mail[]) : [];
  const faults = { failNext: 0, limitNext: 0 };
  const save = () => {
    writeFileSync(`${file}.new`, JSON.stringify(mails));
    renameSync(`${file}.new`, file);
  };
  return serve(port, async (call) => {
    const { method, path: where, response, query } = call;
    if (method === "POST" && (where === "/emails" || where === "/emails/batch")) return take(call, where === "/emails/batch");
    if (method === "GET" && where.startsWith("/emails/")) {
      const mail = mails.find((entry) => entry.id === where.slice("/emails/".length));
      return mail ? sendJson(response, 200, { object: "email", ...mail, last_event: mail.status }) : problem(call, 404, "not_found", "Email not found");
    }
    if (where === "/_control/fault") {
      Object.assign(faults, JSON.parse((await readBody(call.request)).toString("utf8") || "{}"));
      return sendJson(response, 200, faults);
    }
    if (where === "/api/mails") {
      const to = (query.get("to") ?? "").toLowerCase();
      return sendJson(response, 200, { mails: mails.filter((mail) => !to || mail.to.some((address) => address.toLowerCase().includes(to))).reverse() });
    }
    if (where.startsWith("/mail/")) return showMail(call, where.slice("/mail/".length));
    if (where === "/") return showBox(call);
    return problem(call, 404, "not_found", "The requested endpoint does not exist");
  });

  function problem({ response }: Call, status: number, name: string, message: string, headers: Record<string, string> = {}): void {
    sendJson(response, status, { statusCode: status, name, message }, headers);
  }

  async function take(call: Call, isBatch: boolean): Promise<void> {
    const body = await readBody(call.request, 10_000_000);
    if (!/^Bearer re_/.test(call.request.headers.authorization ?? "")) return problem(call, 401, "missing_api_key", "Missing API key in the authorization header.");
    if (faults.limitNext > 0) {
      faults.limitNext -= 1;
      return problem(call, 429, "rate_limit_exceeded", "Too many requests.", { "retry-after": "1" });
    }
    if (faults.failNext > 0) {
      faults.failNext -= 1;
      return problem(call, 500, "internal_server_error", "The stand-in was told to fail.");
    }
    const given = JSON.parse(body.toString("utf8")) as Record<string, unknown> | Record<string, unknown>[];
    const letters = isBatch && Array.isArray(given) ? given : [given as Record<string, unknown>];
    const key = (call.request.headers["idempotency-key"] as string | undefined) ?? null;
    const known = key ? mails.filter((mail) => mail.idempotencyKey === key) : [];
    if (known[0]) {
      if (known[0].subject !== letters[0]?.subject) return problem(call, 409, "invalid_idempotent_request", "This idempotency key was used with another body.");
      return sendJson(call.response, 200, isBatch ? { data: known.map(({ id }) => ({ id })) } : { id: known[0].id });
    }
    for (const letter of letters) {
      if (!letter.to || !letter.from || !letter.subject) return problem(call, 422, "missing_required_field", "Missing `to`, `from` or `subject` field.");
    }
    const made = letters.map((letter): Mail => ({
      id: randomUUID(),
      from: String(letter.from),
      to: (Array.isArray(letter.to) ? letter.to : [letter.to]).map(String),
      subject: String(letter.subject),
      html: String(letter.html ?? ""),
      text: String(letter.text ?? ""),
      tags: (letter.tags as Mail["tags"] | undefined) ?? [],
      idempotencyKey: key,
      createdAt: new Date().toISOString(),
      status: "delivered",
    }));
    mails.push(...made);
    save();
    sendJson(call.response, 200, isBatch ? { data: made.map(({ id }) => ({ id })) } : { id: made[0]?.id });
  }

  function showBox({ response, query }: Call): void {
    const search = query.get("search") ?? "";
    const shown = mails.filter((mail) => mail.to.join(" ").toLowerCase().includes(search.toLowerCase())).reverse().slice(0, 200);
    const rows = shown
      .map((mail) => `<tr><td><a href="/mail/${mail.id}">${escapeHtml(mail.subject)}</a></td><td>${escapeHtml(mail.to.join(", "))}</td><td>${mail.createdAt.slice(0, 16).replace("T", " ")}</td></tr>`)
      .join("");
    const body = shown.length === 0 ? `<p class="muted">No letter${search ? " to this address" : ""} yet.</p>` : `<table><thead><tr><th scope="col">Subject</th><th scope="col">To</th><th scope="col">Sent (UTC)</th></tr></thead><tbody>${rows}</tbody></table>`;
    sendHtml(response, 200, page("Mailbox", `<main><h1>Mailbox</h1><form role="search"><label for="search">To</label><input id="search" name="search" value="${escapeHtml(search)}"><p><button>Search</button></p></form><div class="card">${body}</div></main>`));
  }

  function showMail({ response }: Call, id: string): void {
    const mail = mails.find((entry) => entry.id === id);
    if (!mail) return sendHtml(response, 404, page("Mailbox", `<main><h1>No such letter</h1><p><a href="/">Mailbox</a></p></main>`));
    const tags = mail.tags.map((tag) => `${tag.name}: ${tag.value}`).join(", ");
    const html = mail.html.replaceAll("<a ", '<a target="_top" ');
    sendHtml(
      response,
      200,
      page(
        mail.subject,
        `<main><p><a href="/">Mailbox</a></p><h1>${escapeHtml(mail.subject)}</h1><p class="muted">From ${escapeHtml(mail.from)} to ${escapeHtml(mail.to.join(", "))}, ${mail.createdAt}, ${mail.status}${tags ? `, ${escapeHtml(tags)}` : ""}</p><iframe title="The letter" sandbox="allow-top-navigation-by-user-activation allow-popups" srcdoc="${escapeHtml(html)}"></iframe><h2>As text</h2><pre class="card">${escapeHtml(mail.text)}</pre></main>`,
      ),
    );
  }
}
